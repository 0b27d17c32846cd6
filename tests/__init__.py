"""Tests of the service and its core: `python3 -m tests`."""
