"""benchrun: measure devices while they work, through an external directional coupler."""

__version__ = "0.1.0"
