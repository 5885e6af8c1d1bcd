"""Invented fleets and windows to try an integration against, and a job for each thing that it should have met once."""
