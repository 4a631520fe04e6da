"""The command line: one module per command, thin; no computing here."""
