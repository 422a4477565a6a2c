"""Jobs: whole runs over sets of tiles, unattended."""
