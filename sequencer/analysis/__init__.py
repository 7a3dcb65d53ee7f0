"""Arrays in, values out: segments, classification, uncertainty, decision. Pure; no clock, no file, no instrument."""
