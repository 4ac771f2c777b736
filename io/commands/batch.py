"""`gainwright batch`: its name is fixed, its work is not done yet, and it says so."""

from .not_yet import not_yet

batch = not_yet(
    "batch",
    "Many jobs",
    "call `gainwright process` once a rig file",
)
