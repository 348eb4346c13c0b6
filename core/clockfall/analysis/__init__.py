"""Second floor: what is computed from the effects' summed contributions. No file, no printing."""
