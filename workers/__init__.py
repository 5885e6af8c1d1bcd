"""Queue in, answer out; the planning core, which knows neither queue nor web, lies in `planning`."""
