"""Room: geostatistics."""
