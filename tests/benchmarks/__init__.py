"""How long a plan takes beside a hand-written joint model and the bare solver, and how good it is."""
