"""`gainwright recheck`: its name is fixed, its work is not done yet, and it says so."""

from .not_yet import not_yet

recheck = not_yet(
    "recheck",
    "Hold an earlier sheet against fresh measurements",
    "add the fresh run to the rig file as held-out, and process it",
)
