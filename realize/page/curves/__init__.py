"""The numbers behind each figure of the page; nothing here draws."""
