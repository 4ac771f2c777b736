"""`gainwright retune`: its name is fixed, its work is not done yet, and it says so."""

from .not_yet import not_yet

retune = not_yet(
    "retune",
    "After a mechanical change: what changed, and new gains",
    "inspect and process a rig file of the new runs",
)
