"""The virtual bench: the only room among the drivers that knows what a charger is."""
