"""Number formats, realizations, and the bit-exact model of one sample."""
