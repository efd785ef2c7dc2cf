"""Answers for the bench, made of the responses."""
