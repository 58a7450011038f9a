"""The command line: one module per command, each of which parses, calls one function of benchrun.flow, and prints.

Rule of this room: nothing heavy (pydantic, numpy, pyvisa, skrf, rich, flow) is imported outside a function, so that
`benchrun --help` and the shell's completion answer at once.
"""
