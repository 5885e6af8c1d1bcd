"""Solvers behind one face: their words become ours by table."""
