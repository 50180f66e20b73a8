"""README.md tells what a diagnosis holds: the codes of findings and the keys of diagnosis.json."""

import re
from pathlib import Path

from finback import datasets
from finback.diagnosis import diagnose
from finback.findings import CODES


def table(root: Path, heading: str) -> list[str]:
    """Return what stands in backquotes in the first column of a table."""
    _, _, rest = (root / "README.md").read_text(encoding="utf-8").partition(f"| {heading} |")
    rows = re.findall(r"^\| (`[^|]*) \|", rest.partition("\n\n")[0], re.MULTILINE)
    return [name for row in rows for name in re.findall("`([^`]+)`", row)]


def test_every_code_of_a_finding_stands_in_the_readme(root: Path) -> None:
    assert table(root, "code of a finding") == list(CODES)


def test_every_key_of_a_diagnosis_stands_in_the_readme(root: Path) -> None:
    folder = datasets.path("bench-pin-loose-joint")
    found = diagnose(folder / "rig.toml", folder / "readings.csv").to_dict()
    assert table(root, "key of `diagnosis.json`") == list(found)
    readme = (root / "README.md").read_text(encoding="utf-8")
    for key in ("causes", "together", "costs", "next_measurements"):
        (row,) = re.findall(rf"^\| `{key}` \| (.*) \|$", readme, re.MULTILINE)
        assert found[key], key
        told = set(re.findall("`([^`]+)`", row))
        assert set(found[key][0]) - told == set(), key
