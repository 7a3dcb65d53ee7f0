"""The leaf: YAML with line and column, quantities, faults, SI formatting. Imports nothing of ours."""
