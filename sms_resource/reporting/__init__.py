"""Room: reporting."""
