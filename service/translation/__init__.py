"""Requests to the solver's objects and its results to answers: with the error documents, all that sees both
sides.
"""
