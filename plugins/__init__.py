"""The built-in drivers and steps, found through the same entry point group as anyone's."""
