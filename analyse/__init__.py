"""From spots to a verdict."""
