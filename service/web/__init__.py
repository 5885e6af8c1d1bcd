"""HTTP in and out: bodies read with limits, errors as problem documents, one module for each kind of resource."""
