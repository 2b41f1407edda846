"""What the user says: the protocol file, its units and the liquid it names."""
