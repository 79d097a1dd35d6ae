"""Simulated benches: the bench world and the twins that answer the instruments' bytes."""
