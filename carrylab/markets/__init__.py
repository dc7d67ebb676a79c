"""Each market's parities: a signal, its legs, their weights. Nothing here knows of regressions."""
