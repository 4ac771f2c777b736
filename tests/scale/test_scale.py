"""Ten million samples in bounded memory; a hundred million where asked for (`-m campaign`). RESULTS.md keeps it."""

import re
import subprocess
import sys
from pathlib import Path

import pytest

MOST_MB = 1200.0  # resident, of this process and of the reading child alike; 1e8 samples of two channels are 1600 MB


def shown(samples: str, *more: str, timeout: float) -> str:
    """What the command prints."""
    words = [sys.executable, "-P", str(Path(__file__).parent / "long_record.py"), "--samples", samples, *more]
    ended = subprocess.run(words, capture_output=True, text=True, timeout=timeout, check=False)
    assert ended.returncode == 0, ended.stderr
    return ended.stdout


def peaks_mb(text: str) -> list[float]:
    return [float(found) for found in re.findall(r"(?:peak|child) (\d+) MB", text)]


def read_within_bounds(text: str, factor: int, blocks: int) -> None:
    """The blocks, and the noise in them as the log was made: nothing of the plant is lost in them."""
    assert f"  {blocks} blocks" in text
    assert f"read by blocks of {factor} samples" in text
    assert len(peaks_mb(text)) >= 6
    assert max(peaks_mb(text)) < MOST_MB
    noise, expected = (
        float(each) for each in re.search(r"noise of a block (\S+) mm, made with (\S+) mm", text).groups()
    )  # type: ignore[union-attr]
    assert noise == pytest.approx(expected, rel=0.01)


@pytest.mark.timeout(600)
def test_ten_million_samples_need_no_more_memory_than_one() -> None:
    """A thousand seconds at 10 kHz, in blocks of ten samples."""
    read_within_bounds(shown("1e7", timeout=600), 10, 1_000_000)


@pytest.mark.campaign
@pytest.mark.timeout(3600)
def test_a_hundred_million_samples_need_no_more() -> None:
    """Ten thousand seconds at 10 kHz, in blocks of a hundred samples."""
    read_within_bounds(shown("1e8", timeout=3600), 100, 1_000_000)
