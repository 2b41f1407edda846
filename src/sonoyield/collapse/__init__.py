"""One bubble: its motion, its contents, its chemistry and what leaves it."""
