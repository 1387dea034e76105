"""Room: viewer."""
