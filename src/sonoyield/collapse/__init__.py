"""One bubble: its motion, its contents, its chemistry and what leaves it."""

from sonoyield.collapse.compiled import discard_stale

discard_stale()
