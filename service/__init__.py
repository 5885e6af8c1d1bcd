"""HTTP in, HTTP out, the store and the command line; imports `schemas`, never a solver."""
