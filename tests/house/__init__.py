"""The house itself: what is installed, what may import what, what lies where."""
