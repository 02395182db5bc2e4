"""What a person types: one module a command group, no logic of its own."""
