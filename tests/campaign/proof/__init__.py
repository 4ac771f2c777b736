"""Random true rigs through the whole job: what is released is run on the true rig and judged from outside.

Nothing here imports gainwright; the program is only ever called by its command line.
"""
