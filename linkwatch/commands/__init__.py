"""The commands, a module a kind; cli.py joins them."""
