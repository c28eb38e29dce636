"""Truth: drawing decays, simulated records, weights."""
