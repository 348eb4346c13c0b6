"""For writers of effects and of tests: hypothesis strategies that draw valid binaries. Needs hypothesis."""
