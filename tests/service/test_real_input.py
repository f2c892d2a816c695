"""The whole chain, log to verdict, on data from outside: published surnames, and this machine's file sizes."""

from __future__ import annotations

import csv
import json
import os
from pathlib import Path

import numpy as np
import pytest

from storage.history import open_reader
from tests.service.daemon import command

DATA = Path(__file__).resolve().parent.parent / "published" / "data"

SETTINGS = """
store = "sizes.db"
[feed.sizes]
follow = ["sizes.log"]
lines = "number"
unit = "{unit}"
[watch]
pane = "1d"
window = "1d"
replicates = 2500
"""


def judged(folder: Path, lines: list[str], unit: str) -> dict[str, object]:
    """Take the lines in with `run --finish`; the one refit that `history --json` tells."""
    (folder / "t.toml").write_text(SETTINGS.format(unit=unit))
    (folder / "sizes.log").write_text("\n".join(lines) + "\n")
    done = command("run", "t.toml", "--finish", folder=folder)
    assert done.returncode == 0, done.stderr
    (refit,) = json.loads(command("history", "--in", "t.toml", "--json", folder=folder).stdout)
    assert isinstance(refit, dict)
    return refit


def test_surnames_come_out_as_published(tmp_path: Path) -> None:
    """Clauset, Shalizi & Newman, SIAM Review 51 (2009), Table 6.1, US surnames [values from memory]: n 2753,
    xmin 111.92, alpha 2.5(2), n_tail 239, p 0.20; sizes are thousands of people. Data: US Census 1990."""
    with (DATA / "surnames_1990_us.csv").open() as file:
        rows = [(int(a), int(b)) for a, b in list(csv.reader(file))[1:]]
    lines = [repr(freq * 1e-5 * 248_709.873) for freq, names in rows for _ in range(names)]
    refit = judged(tmp_path, lines, "thousand people")
    assert refit["n"] == 2753
    assert refit["xmin"] == pytest.approx(111.92, abs=0.005)
    assert refit["alpha"] == pytest.approx(2.5, abs=0.05)
    assert refit["n_tail"] == 239
    gof = refit["gof"]
    assert isinstance(gof, dict)
    assert gof["p"] > 0.1
    fit = json.loads(command("fit", "sizes.log", "--json", "--no-rivals", folder=tmp_path).stdout)
    for key in ("n", "alpha", "xmin", "n_tail", "ks_distance"):
        assert fit[key] == refit[key]


def test_file_sizes_of_this_machine(tmp_path: Path) -> None:
    """Sizes of the files under /usr: tens of thousands of values nobody made up, on the grid in one pane.
    Reference: counts and the exponent at the xmin found are recomputed here with numpy alone."""
    sizes = []
    for folder, _, names in os.walk("/usr"):
        for name in names:
            path = os.path.join(folder, name)
            if os.path.isfile(path) and not os.path.islink(path):
                sizes.append(os.path.getsize(path))
    lines = [str(size) for size in sizes]
    refit = judged(tmp_path, lines, "bytes")
    kept = np.array([size for size in sizes if size > 0], float)
    assert refit["n"] == kept.size
    with open_reader(tmp_path / "sizes.db") as reader:
        (chain,) = reader.chains()
        assert chain.lines == len(sizes)
        assert chain.rejected.get("zero", 0) == sizes.count(0)
        assert reader.panes()[0].largest == kept.max()
    assert refit["resolution"] == "grid"
    xmin, alpha, n_tail = (float(str(refit[key])) for key in ("xmin", "alpha", "n_tail"))
    tail = kept[kept >= xmin]
    assert n_tail == tail.size
    # Rounding down to cells 0.45 % wide moves the mean log by at most that: compare within it.
    assert alpha - 1 == pytest.approx(1 / np.mean(np.log(tail / xmin)), rel=0.01)
