"""sim_instruments/instruments."""
