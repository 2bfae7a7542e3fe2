"""Brute force to test against: nothing here imports the package or shares a method with it."""
