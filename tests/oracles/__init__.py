"""Judge plans from outside: formulations and classic results that share nothing with the planner."""
