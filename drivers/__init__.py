"""Instruments and time: VISA session, roles, dialects, bench file, clock, safe state. Knows nothing of procedures."""
