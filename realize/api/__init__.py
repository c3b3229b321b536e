"""The library for people who script: what ``import realize`` offers.

Numbers come from Python here, and arrays of numpy; everything below stays as it is for the command line.
"""
