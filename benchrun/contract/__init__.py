"""What plugins are written against: hooks, roles, settable quantities, actions, readings, clocks."""
