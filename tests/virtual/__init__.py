"""Virtual shops: a plain simulation to hold the estimates against. `python -m tests.virtual`."""
