"""Frozen records and arrays that every floor above may pass around."""
