"""sim_instruments/world."""
