"""The drawing of each figure: matplotlib, one module a figure, colours and sizes in one place."""
