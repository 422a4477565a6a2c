"""Jobs: whole tile sets from start to finish, resumable, with atomic outputs."""
