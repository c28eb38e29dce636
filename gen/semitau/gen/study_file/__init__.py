"""The study file: reading, checking, its models."""
