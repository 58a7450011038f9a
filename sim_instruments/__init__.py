"""The simulated bench: one world, five kinds of instrument. Imports nothing of benchrun."""
