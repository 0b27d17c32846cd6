"""Behaviour of the service as its clients see it."""
