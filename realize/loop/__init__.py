"""The loop around a controller."""
