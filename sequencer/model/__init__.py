"""What people write, as checked data: procedure, specification, pack, order, findings. Pure."""
