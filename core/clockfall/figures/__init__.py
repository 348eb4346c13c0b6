"""Pictures of what was found, for print: each is a `Figure`, drawn without a window. Needs matplotlib, an extra."""
