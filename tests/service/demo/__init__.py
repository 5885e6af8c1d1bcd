"""Tests of the demo: that it shows what it claims, and fails where that does not hold."""
