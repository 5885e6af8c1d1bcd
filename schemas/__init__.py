"""The contract: every document that travels by HTTP, queue or file, and the checks that need no solver."""
