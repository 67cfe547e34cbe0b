"""Answers to text and data; computes nothing."""
