"""Plug-ins: the hooks, the contract of each kind, and the registry that finds and loads them."""
