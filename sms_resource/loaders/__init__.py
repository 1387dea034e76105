"""Room: loaders."""
