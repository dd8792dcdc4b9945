"""Figures from tables: each draws numbers that stand in a table beside it, and computes nothing."""
