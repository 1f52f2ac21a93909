"""Compiled arithmetic of closed-loop control: estimates, decisions, execution errors."""
