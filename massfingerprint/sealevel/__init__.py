"""The sea-level equation: solver, fingerprints, values at sites."""
