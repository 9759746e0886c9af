"""Writing the results: the map and the tables.  Nothing here reads an archive."""
