"""Tracing: one seed, frozen fields, one line with its spread and the reasons where it stopped."""
