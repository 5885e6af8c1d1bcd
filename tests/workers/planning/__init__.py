"""The same tree and the same names as the code."""
