"""The contract is read whole, exactly, and without repair."""
