"""Equations of motion and their integration."""
