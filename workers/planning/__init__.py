"""The core: from a validated request to an audited answer; knows neither queue nor web."""
