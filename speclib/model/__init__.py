"""Frozen records that every room shares; results carry `to_json()` and a schema number."""
