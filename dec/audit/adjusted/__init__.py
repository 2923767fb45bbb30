"""What least squares makes of it, by either law."""
