"""Lines: traces merged, simplified, named and written as layers."""
