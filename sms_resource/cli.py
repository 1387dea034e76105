"""The commands (see workflow for the work)."""


def main() -> None:
    """Entry point."""
