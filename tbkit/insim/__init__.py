"""What runs inside the simulator, and nothing else: no command line, no YAML, no Jinja, no numpy."""
