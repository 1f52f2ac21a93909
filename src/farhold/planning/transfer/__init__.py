"""Transfers: what it takes to fly from one state to another in a given time."""
