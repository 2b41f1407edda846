"""What the user sees: tables and files, read from results only."""
