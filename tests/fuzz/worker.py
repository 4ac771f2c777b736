"""One process of fuzzing: led by coverage where atheris is installed and the code runs in this process, else by chance.

`python -P tests/fuzz/worker.py KIND INPUTS SEED FOLDER`; the tally is FOLDER/tally.json, also after a crash.
"""

import random
import sys
import tempfile
from pathlib import Path

sys.path.insert(0, str(Path(__file__).resolve().parent))

EVERY = 500  # inputs between two writings of the tally


def main() -> None:
    name, inputs, seed, folder = sys.argv[1], int(sys.argv[2]), int(sys.argv[3]), Path(sys.argv[4])
    room = Path("/dev/shm") if Path("/dev/shm").is_dir() else None
    with tempfile.TemporaryDirectory(dir=room) as place:
        deep = Path(place) / "one" / "two"  # so that ".." in a pattern stays in here
        deep.mkdir(parents=True)
        (_guided if _can_be_guided(name) else _by_chance)(name, inputs, seed, folder, deep)


def _can_be_guided(name: str) -> bool:
    import importlib.util

    return name != "hdf5" and importlib.util.find_spec("atheris") is not None


def _by_chance(name: str, inputs: int, seed: int, folder: Path, deep: Path) -> None:
    from judged import bound_memory
    from kinds import KINDS
    from tally import Tally

    kind, dice, tally = KINDS[name], random.Random(seed), Tally(folder / "kept")
    bound_memory()
    for _ in range(inputs):
        made = kind.sound(dice) if dice.random() < 0.3 else kind.fresh(dice)
        tally.add(made, kind.run(deep, made))
        if tally.inputs % EVERY == 0:
            tally.write(folder / "tally.json")
    tally.write(folder / "tally.json")


def _guided(name: str, inputs: int, seed: int, folder: Path, deep: Path) -> None:
    """Atheris keeps inputs that reach new branches and changes those; most of the changes are ours, some its own."""
    import atheris

    with atheris.instrument_imports(include=["gainwright.io"]):
        from kinds import KINDS
    from judged import bound_memory
    from tally import Tally

    kind, tally = KINDS[name], Tally(folder / "kept")

    def one(content: bytes) -> None:
        tally.add(content, kind.run(deep, content))
        if tally.inputs % EVERY == 0 or tally.inputs >= inputs:
            tally.write(folder / "tally.json")

    def changed(content: bytes, most: int, its_seed: int) -> bytes:
        dice = random.Random(its_seed)
        chance = dice.random()
        if chance < 0.3:
            return kind.fresh(dice)[:most]
        if chance < 0.85:
            return kind.spoil(bytes(content), dice)[:most]
        return bytes(atheris.Mutate(content, most))

    corpus = folder / "corpus"
    corpus.mkdir(exist_ok=True)
    dice = random.Random(seed)
    for number in range(200):
        (corpus / f"seed_{number}").write_bytes(kind.fresh(dice))
    flags = [f"-runs={inputs}", f"-seed={seed}", "-max_len=8192", "-timeout=600", "-rss_limit_mb=0", "-verbosity=0"]
    atheris.Setup([sys.argv[0], *flags, str(corpus)], one, custom_mutator=changed)
    bound_memory()
    atheris.Fuzz()


if __name__ == "__main__":
    main()
