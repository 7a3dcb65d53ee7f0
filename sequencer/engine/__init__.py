"""What happens on the bench: stand-in, scan loop, guard, methods, record."""
