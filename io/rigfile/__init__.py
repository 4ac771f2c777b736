"""The rig file: schema, loading, and messages that name the nearest right word."""
