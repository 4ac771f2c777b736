"""What README.md and DEVELOPERS.md show is true: commands, rig file, examples."""

import functools
import re
import shutil
import subprocess
import sys
from pathlib import Path

import pytest
from gainwright.io import job
from gainwright.io.commands.main import main
from gainwright.io.rigfile.load import load_rig

METADATA = "Metadata-Version: 2.1\nName: pipe-reader\nVersion: 1\n"
PIPE_LOG = "pipe log 1\nt [s] | drive [V] | flow [l/min]\n0 | 0 | 1.5\n0.1 | 1 | 1.5\n0.2 | 1 | 2.25\n"


def fenced(text: str, mark: str) -> list[str]:
    """Contents of the fenced blocks that follow this mark directly."""
    return re.findall(rf"{re.escape(mark)}\n```\w*\n(.*?)\n```", text, re.DOTALL)


def blocks(text: str, language: str = "") -> list[str]:
    """Contents of all fenced blocks of a language."""
    return re.findall(rf"^```{language}\n(.*?)\n```$", text, re.DOTALL | re.MULTILINE)


@pytest.fixture(scope="module")
def readme(checkout: Path) -> str:
    return (checkout / "README.md").read_text("utf-8")


@pytest.fixture(scope="module")
def developers(checkout: Path) -> str:
    return (checkout / "DEVELOPERS.md").read_text("utf-8")


@pytest.fixture(scope="module")
def set_up_commands(readme: str) -> list[str]:
    """The README's commands, as .ci/run picks them: one line each, making the environment first."""
    return [block for block in blocks(readme) if block.startswith("python3 -m venv ")]


def test_the_readme_starts_with_the_job_and_two_commands(readme: str, set_up_commands: list[str]) -> None:
    """One paragraph, then exactly two one-line commands that need nothing before them."""
    head = readme.split("\n## ")[0].strip().split("\n\n")
    assert head[0] == "# gainwright"
    assert len(head) == 2
    assert len(set_up_commands) == 2
    assert all("\n" not in each and ".venv/bin/pip install" in each for each in set_up_commands)


def test_the_readme_main_command_is_a_call_that_the_program_takes(
    set_up_commands: list[str], checkout: Path, tmp_path: Path, capsys
) -> None:
    """Its last part is run here word for word, with its results elsewhere; the sample is released."""
    words = set_up_commands[0].split(" && ")[-1].split()
    assert words[:2] == [".venv/bin/gainwright", "process"]
    assert main(["process", str(checkout / words[2]), *words[3:], "--out", str(tmp_path)]) == 0
    assert sorted(path.name for path in tmp_path.iterdir()) == ["dossier.h5", "gains.json", "report.html"]
    assert "released" in capsys.readouterr().out.lower()


def test_the_readme_test_command_calls_pytest_with_the_extra_that_brings_it(set_up_commands: list[str]) -> None:
    """.ci/run executes it; here its words are checked, so that it is not run inside itself."""
    assert "'.[tests]'" in set_up_commands[1]
    assert set_up_commands[1].split(" && ")[-1].startswith(".venv/bin/pytest")


def test_the_readme_rig_file_is_one(readme: str, tmp_path: Path) -> None:
    """The example is accepted once the logs that it names exist, and so it is with the frequency table beside them."""
    example, table = blocks(readme, "toml")
    for name in ("step_up.csv", "monday.csv", "analyser.csv"):
        (tmp_path / name).write_text("t,drive,flow\n0,0,1\n0.1,1,1\n0.2,1,2\n", "utf-8")
    (tmp_path / "rig.toml").write_text(example, "utf-8")
    rig = load_rig(tmp_path / "rig.toml")
    assert [run.use for run in rig.runs] == ["fit", "held-out"]
    assert rig.requirements.test_step == 5.0
    (tmp_path / "rig.toml").write_text(f"{example}\n{table}", "utf-8")
    both = load_rig(tmp_path / "rig.toml")
    assert [run.excitation for run in both.runs] == ["step", "auto", "frequency-table"]


@pytest.mark.parametrize("name", ["README.md", "DEVELOPERS.md"])
def test_the_files_and_folders_that_a_document_names_exist(checkout: Path, name: str) -> None:
    """Whatever stands in code marks below one of the checkout's folders, and every picture."""
    text = (checkout / name).read_text("utf-8")
    paths = re.findall(r"`((?:ident|design|io|tests|sample_runs|\.ci)/[\w./-]*)`", text)
    paths += re.findall(r"!\[[^\]]*\]\(([^)]+)\)", text)
    assert paths
    assert [path for path in paths if not (checkout / path).exists() and "/out" not in path] == []


def test_the_readme_names_every_sample(readme: str, checkout: Path) -> None:
    """A sample that nobody is told of is no sample."""
    rigs = sorted(str(path.parent.relative_to(checkout)) for path in (checkout / "sample_runs").glob("*/rig.toml"))
    assert rigs
    assert [rig for rig in rigs if f"`{rig}`" not in readme] == []


def test_the_licence_stands_whole_at_the_end_of_the_readme(readme: str, checkout: Path) -> None:
    """SPDX expression in pyproject.toml, full text in the README's last section, nothing after it."""
    assert 'license = "BSD-3-Clause"' in (checkout / "pyproject.toml").read_text("utf-8")
    last = readme.split("\n## ")[-1]
    assert last.startswith("Licence")
    assert "the gainwright authors" in last
    assert all(f"\n{n}. " in last for n in (1, 2, 3))
    assert last.rstrip().endswith("POSSIBILITY OF SUCH DAMAGE.")


def test_the_example_reader_reads_through_the_same_door_as_the_built_in_ones(developers: str, tmp_path: Path) -> None:
    """Installed by its metadata alone, it is found by content and its channels are shown."""
    site = tmp_path / "site"
    info = site / "pipe_reader-1.dist-info"
    info.mkdir(parents=True)
    (info / "METADATA").write_text(METADATA, "utf-8")
    (info / "entry_points.txt").write_text(fenced(developers, "<!-- file: entry_points.txt -->")[0], "utf-8")
    (site / "pipe_reader.py").write_text(fenced(developers, "<!-- file: pipe_reader.py -->")[0], "utf-8")
    log = tmp_path / "run.unknown"
    log.write_text(PIPE_LOG, "utf-8")
    call = f"import sys; sys.path.append({str(site)!r}); from gainwright.io.commands.main import main; sys.exit(main())"
    words = [sys.executable, "-P", "-c", call, "inspect", str(log)]
    shown = subprocess.run(words, capture_output=True, text=True, timeout=120, check=False)
    assert shown.returncode == 0, shown.stderr
    assert "(pipe log)" in shown.stdout
    assert re.search(r"flow +l/min +3 +0 +1\.5 +2\.25", shown.stdout)


def test_the_example_structure_is_fitted(developers: str) -> None:
    """The block runs as it stands; its own assertions are the expectations."""
    (example,) = fenced(developers, "<!-- run -->")
    assert example.count("assert ") == 3
    exec(compile(example, "DEVELOPERS.md", "exec"), {})  # noqa: S102  (the document's own example)


def test_the_readme_pictures_are_made_by_the_block_that_says_so(
    developers: str, readme: str, checkout: Path, tmp_path: Path, monkeypatch: pytest.MonkeyPatch
) -> None:
    """Beside a copy of the sample it draws every SVG of the README; the README's own block draws all, from one job."""
    (example,) = fenced(developers, "<!-- pictures -->")
    (notebook,) = fenced(readme, "<!-- notebook -->")
    for name in ("paddle", "paddle_heavier"):
        shutil.copytree(checkout / "sample_runs" / name, tmp_path / "sample_runs" / name)
    monkeypatch.chdir(tmp_path)
    monkeypatch.setattr(job, "process_rig", functools.cache(job.process_rig))
    exec(compile(example, "DEVELOPERS.md", "exec"), {})  # noqa: S102  (the document's own example)
    shown = [path for path in re.findall(r"!\[[^\]]*\]\(([^)]+)\)", readme) if path.endswith(".svg")]
    made = sorted((tmp_path / "sample_runs" / "pictures").iterdir())
    assert [path.name for path in made] == ["paddle_ribbon.svg", "paddle_step.svg", "paddle_two_loci.svg"]
    assert len(shown) == 3
    assert {tmp_path / path for path in shown} <= set(made)
    for path in made:
        picture = path.read_text("utf-8")
        assert picture.startswith("<?xml")
        assert picture.count("<path") > 5
    exec(compile(notebook, "README.md", "exec"), {})  # noqa: S102  (the document's own example)
    drawn = {path.stem for path in tmp_path.glob("*.png")}
    assert {"step", "ribbon", "headroom", "ladder", "log-0", "locus", "margins", "held-out-0"} <= drawn


def test_the_block_finder_finds_marked_blocks_only() -> None:
    """A test on nothing would pass."""
    text = "<!-- run -->\n```python\na = 1\n```\n\n```python\nb = 2\n```\n"
    assert fenced(text, "<!-- run -->") == ["a = 1"]
    assert blocks(text, "python") == ["a = 1", "b = 2"]
