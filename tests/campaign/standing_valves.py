"""Whether gains hold wherever a sticking valve stood before: `python -P tests/campaign/standing_valves.py --seed 21`.

A campaign judges from one start, the valve standing where the command does. Here the controller that was tuned on the
true rig, and with `--keep FOLDER` of a campaign the sheet's law too, runs from twenty places within the valve's band.
"""

import argparse
import json
import sys
from dataclasses import replace
from pathlib import Path

import numpy as np

sys.path.insert(0, str(Path(__file__).resolve().parent))

import paths  # noqa: F401  (puts the kit on the path before it is imported)
from proof.achievable import law_of, tune
from proof.job import Prepared, prepare
from proof.judged import finer, missed, run_law
from proof.many import tasks
from proof.margins import frequencies, sampled_plant
from true_rig import SheetController
from true_rig.rough_stages import StickingValve

STARTS = np.linspace(-0.95, 0.95, 20)


class StandingValve(StickingValve):
    """A valve that stands a share of its band away from the command before anything moves."""

    def __init__(self, valve: StickingValve, share: float) -> None:
        super().__init__(valve.stick, valve.slide)
        self.away = share * valve.stick

    def rest(self, u: float) -> float:
        self.y = u + self.away
        return self.y


def good_starts(job: Prepared, controller: SheetController) -> int:
    """From how many of the twenty places everything that is asked holds."""
    rig, asked = job.drawn.rig, job.asked
    frequency = frequencies(rig, asked.update_interval, 0.02 / asked.settling)
    plant = sampled_plant(rig, asked.update_interval, asked.computation_delay, frequency)
    good = 0
    for share in STARTS:
        stages = tuple(StandingValve(s, share) if isinstance(s, StickingValve) else s for s in rig.stages)
        there = finer(replace(rig, stages=stages), asked)
        good += not missed(asked, run_law(there, controller, asked, plant, frequency))
    return good


def main() -> None:
    ask = argparse.ArgumentParser(description=__doc__)
    ask.add_argument("--rigs", type=int, default=48)
    ask.add_argument("--start", type=int, default=0)
    ask.add_argument("--seed", type=int, default=21)
    ask.add_argument("--keep", type=Path, help="what a campaign of these rigs kept")
    given = ask.parse_args()
    for _, family, seed, index in tasks(given.rigs, 0, given.seed, True, given.start):
        if family != "sticking valve":
            continue
        job = prepare(family, np.random.default_rng([seed, index]))
        best = tune(job.drawn, job.asked)
        rig = job.drawn.rig
        tuned = SheetController(law_of(best.gains, job.asked, rig.command_rest), rig.command_rest, rig.response_rest)
        words = f"{index:4d} achievable from the campaign's start: {'yes' if best.achievable else 'no '}"
        words += f"   tuned gains hold from {good_starts(job, tuned):2d} of {len(STARTS)}"
        sheet = given.keep / f"rig_{index:04d}" / "out" / "gains.json" if given.keep else None
        if sheet and sheet.exists():
            found = json.loads(sheet.read_text(encoding="utf-8"))
            if found["status"] == "released":
                words += f"   released gains from {good_starts(job, SheetController.from_sheet(found)):2d}"
        print(words, flush=True)


if __name__ == "__main__":
    main()
