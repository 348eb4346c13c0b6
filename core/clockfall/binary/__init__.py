"""Ground floor: what a binary is. Pure numbers; no plugin, no file, no printing."""
