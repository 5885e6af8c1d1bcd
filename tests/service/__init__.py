"""Tests of the service, in the folders of what they test."""
