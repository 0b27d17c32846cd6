"""Decisions from fields: what follows from a result as a function of numbers. It knows no web, no units and no bodies.

Every function here is handed an `Evaluate`, asks it for waves of cases, and is deterministic in its arguments.
"""
