"""The library file: schema, the one write path, the audit trail and reads. Nothing else touches SQLite."""
