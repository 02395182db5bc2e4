"""How it is counted: one folder a method, each with its plain twin and its compiled kernel."""
