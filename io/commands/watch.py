"""`gainwright watch`: its name is fixed, its work is not done yet, and it says so."""

from .not_yet import not_yet

watch = not_yet(
    "watch",
    "Process each completed run as it appears",
    "call `gainwright process` when a run is complete",
)
