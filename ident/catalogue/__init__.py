"""The structures a plant may have: one file each, with its formula, parameters and first guess."""
