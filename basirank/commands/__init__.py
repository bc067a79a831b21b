"""The commands, one module each; `basirank.cli` loads the one that is asked for."""
