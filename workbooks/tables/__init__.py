"""A table on its way into the formats of archives."""
