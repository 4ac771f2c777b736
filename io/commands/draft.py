"""`gainwright draft`: its name is fixed, its work is not done yet, and it says so."""

from .not_yet import not_yet

draft = not_yet(
    "draft",
    "A rig file to start from",
    "start from a rig file under sample_runs/",
)
