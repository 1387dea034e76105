"""Room: blocks."""
