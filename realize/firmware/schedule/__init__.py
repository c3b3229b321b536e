"""What the firmware of a gain schedule has beside that of one design: the table, its lookup, and their account."""
