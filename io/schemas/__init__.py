"""JSON Schemas of the files that other programs read and write: the rig file and the gain sheet."""
