"""Fields: what the net says of every place on the working grid, quantised and cached."""
