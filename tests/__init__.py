"""The same tree and the same names as the code, and what belongs to no single module."""
