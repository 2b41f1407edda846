"""What the user needs to know: which rates matter, and how sure a number is."""
