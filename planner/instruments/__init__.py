"""What a look costs and how well it measures."""
