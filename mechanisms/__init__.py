"""Mechanisms as Cantera YAML, with the tables and the script they are built from."""
