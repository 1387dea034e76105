"""Room: samples."""
