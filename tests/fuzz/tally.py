"""What a stretch of fuzzing has seen so far, and its faults with one input of each kept."""

import json
import time
from collections import Counter
from collections.abc import Iterable
from dataclasses import dataclass, field
from pathlib import Path
from typing import Any

from judged import Verdict, held_megabytes


@dataclass
class Tally:
    """Counts.

    Attributes
    ----------
    kept : Path
        Folder for one input of each fault.
    """

    kept: Path
    inputs: int = 0
    calls: Counter[int] = field(default_factory=Counter)  # exit code to how often
    faults: Counter[str] = field(default_factory=Counter)
    first_mb: float = field(default_factory=held_megabytes)
    most_mb: float = 0.0
    slowest_s: float = 0.0
    slowest_input: bytes = b""
    began: float = field(default_factory=time.process_time)

    def add(self, content: bytes, verdicts: Iterable[Verdict]) -> bool:
        """Count one input; whether it showed a fault."""
        start, faulty = time.process_time(), False
        for verdict in verdicts:
            self.calls[verdict.code] += 1
            if verdict.fault is not None:
                faulty = True
                self._keep(content, verdict.fault.key, verdict.fault.text)
        self.inputs += 1
        spent = time.process_time() - start
        if spent > self.slowest_s:
            self.slowest_s, self.slowest_input = spent, content
        if self.inputs % 100 == 0:
            self.most_mb = max(self.most_mb, held_megabytes())
            if self.inputs == 2000:
                self.first_mb = held_megabytes()  # caches are full by now
        return faulty

    def _keep(self, content: bytes, key: str, text: str) -> None:
        self.faults[key] += 1
        if self.faults[key] == 1:
            self.kept.mkdir(parents=True, exist_ok=True)
            number = len(self.faults)
            (self.kept / f"fault_{number:02d}.input").write_bytes(content)
            (self.kept / f"fault_{number:02d}.txt").write_text(f"{key}\n\n{text}\n", "utf-8", "replace")

    def summary(self) -> dict[str, Any]:
        """All of it, for JSON."""
        return {
            "inputs": self.inputs,
            "calls": {str(code): count for code, count in sorted(self.calls.items())},
            "faults": dict(self.faults.most_common()),
            "processor_s": round(time.process_time() - self.began, 1),
            "slowest_s": round(self.slowest_s, 3),
            "memory_mb": [round(self.first_mb), round(self.most_mb)],
        }

    def write(self, file: Path) -> None:
        """The summary as JSON, and the slowest input beside it."""
        file.write_text(json.dumps(self.summary()) + "\n", "utf-8")
        if self.slowest_input:
            self.kept.mkdir(parents=True, exist_ok=True)
            (self.kept / "slowest.input").write_bytes(self.slowest_input)
