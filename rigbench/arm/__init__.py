"""The arm: its files, its parameters as arrays, its dynamics, and how a plant departs from it."""
