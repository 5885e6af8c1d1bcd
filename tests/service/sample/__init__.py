"""Tests of the sample: that it can be loaded, and shows what it says."""
