"""Questions about a circuit."""
