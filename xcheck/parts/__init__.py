"""Data sheets of common amplifiers: data in TOML, read by `catalogue`."""
