"""The page on which people check spots, and the server behind it."""
