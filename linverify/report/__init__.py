"""Verdicts in, text and files out; computes nothing."""
