"""A rig file to start from: roles guessed from names and data, written so that a person can confirm each guess."""
