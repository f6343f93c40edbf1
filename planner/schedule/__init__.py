"""From slots to a checked plan."""
