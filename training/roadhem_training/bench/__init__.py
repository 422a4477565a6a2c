"""The benchmark: what the model is worth on held-out invented scenes and on real sets, beside two baselines."""
