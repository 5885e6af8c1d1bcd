"""What breaks on a real machine: real processes, a real Redis, real signals."""
