"""Certificates, and the question whether two models have the same transfer matrix.

What must be trusted is `realize.checker` alone; this room only makes what it checks.
"""
