"""Room: economics."""
