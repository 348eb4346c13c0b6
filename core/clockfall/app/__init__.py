"""Top floor: the command line. No physics."""
