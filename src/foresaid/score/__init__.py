"""Statistics on plain arrays; every module is usable alone."""
