"""The command line: one file per command, thin; everything it does is also a function of the package."""
