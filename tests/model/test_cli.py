"""The command line: help at once, one JSON object, pictures and pages that stand alone."""

from __future__ import annotations

import fcntl
import json
import os
import pty
import re
import signal
import struct
import subprocess
import sys
import termios
import time
from collections.abc import Callable
from pathlib import Path

import cv2
import numpy as np
import pytest
from click.testing import CliRunner
from drawn import EAST, NORTH, drawn_model, drawn_pixels, write_seeds, write_tile
from made_session import open_made
from test_jobs import INPUTS, PLACES, silent

import roadhem.cli.main as command
from roadhem import __version__
from roadhem.delivery.backdrop import backdrop
from roadhem.delivery.page import CAUTIONS, Figures, write_page
from roadhem.delivery.palette import SPREAD_COLOURS, SPREAD_LIMITS_M, step_names, step_of
from roadhem.delivery.picture import draw_traced, round_length
from roadhem.errors import RoadhemError
from roadhem.jobs.trace import TraceJob, trace_tiles
from roadhem.state import find_model, home, shelf
from roadhem.tiles.mosaic import Patch

HEAVY = ("numpy", "onnxruntime", "rasterio", "shapely", "numba", "matplotlib", "pyogrio", "pyproj", "torch", "scipy")
VERBS = ("mark", "measure", "scene", "shelf", "trace")
EDGE = [(EAST + 4, NORTH - 20), (EAST + 36, NORTH - 22)]


@pytest.fixture
def place(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> Path:
    """A folder with a tile, a seed and a model."""
    write_tile(tmp_path / "tile.tif", drawn_pixels([EDGE], 400))
    write_seeds(tmp_path / "seeds.gpkg", [(EAST + 20, NORTH - 21.2)])
    drawn_model(tmp_path / "model")
    monkeypatch.chdir(tmp_path)
    return tmp_path


def cli(*arguments: object, **options: object) -> subprocess.CompletedProcess[str]:
    """Run the command line in a process of its own."""
    line = [sys.executable, "-m", "roadhem.cli", *map(str, arguments)]
    return subprocess.run(line, capture_output=True, text=True, encoding="utf-8", check=False, **options)


def test_help_imports_nothing_heavy() -> None:
    """Should list all verbs without importing a library that takes time."""
    code = (
        "import sys; from roadhem.cli.main import roadhem\n"
        "roadhem.main(['--help'], standalone_mode=False)\n"
        f"print([name for name in {HEAVY} if name in sys.modules])"
    )
    done = subprocess.run([sys.executable, "-c", code], capture_output=True, text=True, check=True)
    *overview, heavy = done.stdout.splitlines()
    assert heavy == "[]"
    assert all(re.search(rf"^  {verb} ", "\n".join(overview), re.M) for verb in VERBS)


def test_every_verb_shows_an_example() -> None:
    """Should show an example in the help of each verb, and nothing on stderr."""
    for verb in [[name] for name in VERBS] + [["shelf", "list"], ["shelf", "show"]]:
        result = CliRunner().invoke(command.roadhem, [*verb, "--help"])
        assert result.exit_code == 0, verb
        assert "Example" in result.output, verb
        assert f"roadhem {' '.join(verb)}" in result.output.split("Example")[1], verb


def test_version_and_bare_command() -> None:
    """Should tell the version, and show the overview when nothing is asked."""
    assert cli("--version").stdout == f"roadhem {__version__}\n"
    bare = cli()
    assert (bare.returncode, bare.stderr) == (0, "")
    assert "Verbs:" in bare.stdout


def test_json_is_alone_on_stdout(place: Path) -> None:
    """Should print one JSON object and nothing else, for each verb that has figures."""
    model = ("--model", "model")
    runs = {
        "trace": ["trace", "tile.tif", "--seeds", "seeds.gpkg", "--out", "o.gpkg", *model],
        "mark": ["mark", "tile.tif", "--out", "m.gpkg", *model],
        "measure": ["measure", "o.gpkg", "--truth", "o.gpkg"],
        "shelf": ["shelf", "list"],
    }
    told = {}
    for verb, arguments in runs.items():
        done = cli(*arguments, "--json")
        assert (done.returncode, done.stderr) == (0, ""), verb
        told[verb] = json.loads(done.stdout)
    assert told["trace"].keys() >= {"seeds", "lines", "km", "hidden_km", "unplaced", "seconds", "mpx_per_s"}
    assert told["mark"]["seeds"] == 1
    assert told["measure"].keys() >= {
        "buffer_m", "completeness", "correctness", "quality", "redundancy", "rms_m", "lateral_median_m",
        "lateral_p95_m",
    }  # fmt: skip
    assert told["measure"]["completeness"] == 1.0


def test_json_tells_undefined_as_null(place: Path) -> None:
    """Should print null, not NaN, where nothing matched."""
    import pyogrio
    import shapely

    for name, shift in (("a.gpkg", 0.0), ("b.gpkg", 50.0)):
        shapes = shapely.to_wkb(shapely.linestrings([[(EAST, NORTH + shift), (EAST + 9, NORTH + shift)]]))
        pyogrio.raw.write(name, shapes, [], [], layer="edges", geometry_type="LineString", crs="EPSG:25832")
    values = json.loads(cli("measure", "a.gpkg", "--truth", "b.gpkg", "--json").stdout)
    assert values["rms_m"] is None
    assert values["lateral_median_m"] is None


def test_table_of_trace(place: Path) -> None:
    """Should print seeds, lines, km, hidden km, unplaced, seconds and Mpx/s, and no bar off a terminal."""
    done = cli("trace", "tile.tif", "--seeds", "seeds.gpkg", "--out", "o.geojson", "--model", "model")
    names = [re.split(r"\s{2,}", line)[0] for line in done.stdout.splitlines()]
    assert names == ["seeds", "lines", "km", "hidden km", "unplaced", "seconds", "Mpx/s"]
    assert done.stderr == ""
    assert sorted(p.name for p in place.glob("o.*")) == [
        "o.doubts.geojson", "o.geojson", "o.seeds.geojson", "o.stretches.geojson", "o.unplaced.geojson",
    ]  # fmt: skip


def test_bar_on_a_terminal(place: Path) -> None:
    """Should draw a bar on stderr when that is a terminal."""
    outer, inner = pty.openpty()
    fcntl.ioctl(inner, termios.TIOCSWINSZ, struct.pack("HHHH", 24, 80, 0, 0))
    arguments = ["trace", "tile.tif", "--seeds", "seeds.gpkg", "--out", "o.gpkg", "--model", "model"]
    done = subprocess.run(
        [sys.executable, "-m", "roadhem.cli", *arguments], stdout=subprocess.PIPE, stderr=inner, check=False
    )
    shown = os.read(outer, 100_000).decode("utf-8", "replace")
    os.close(inner)
    os.close(outer)
    assert done.returncode == 0
    assert "seeds" in shown
    assert b"1/1" not in done.stdout


@pytest.fixture
def broken_verb(monkeypatch: pytest.MonkeyPatch) -> Callable[[BaseException], None]:
    """Let `shelf list` raise what a test asks for."""

    def breaks(error: BaseException) -> None:
        def raise_it() -> None:
            raise error

        monkeypatch.setattr("roadhem.state.shelf", raise_it)

    return breaks


@pytest.mark.parametrize(
    ("error", "status", "words"),
    [
        (RoadhemError("It is broken; mend it"), 2, "It is broken; mend it."),
        (OSError(28, "No space left on device", "o.gpkg"), 2, "o.gpkg: no space left on device; free space"),
        (PermissionError(13, "Permission denied", "o.gpkg"), 2, "change the permissions"),
        (KeyboardInterrupt(), 1, "Stopped"),
        (MemoryError(), 1, "Memory"),
    ],
)
def test_whatever_stops_a_verb_is_one_sentence(
    broken_verb: Callable[[BaseException], None],
    capsys: pytest.CaptureFixture[str],
    error: BaseException,
    status: int,
    words: str,
) -> None:
    """Should end in one sentence with the right status."""
    broken_verb(error)
    with pytest.raises(SystemExit) as ended:
        command.main(["shelf", "list"])
    out, err = capsys.readouterr()
    assert (ended.value.code, out) == (status, "")
    assert words in err
    assert err.count("\n") == 1


def test_a_fault_of_ours_leaves_a_log(
    broken_verb: Callable[[BaseException], None], capsys: pytest.CaptureFixture[str]
) -> None:
    """Should not show a traceback but keep it in a log and say where."""
    broken_verb(ZeroDivisionError("of all things"))
    with pytest.raises(SystemExit) as ended:
        command.main(["shelf", "list"])
    err = capsys.readouterr().err
    assert ended.value.code == 1
    assert err.count("\n") == 1
    assert "Traceback" not in err
    log = Path(re.search(r"log in (.*)\.\n", err)[1])
    assert log.parent == home() / "logs"
    assert "ZeroDivisionError: of all things" in log.read_text()


@pytest.mark.parametrize("workers", [1, 2])
def test_interrupting_for_real(place: Path, workers: int) -> None:
    """Should end on Ctrl-C in one sentence, with the old file as it was."""
    (place / "o.gpkg").write_text("old")
    points = [(EAST + 5 + 0.01 * n, NORTH - 20.1) for n in range(3000)]
    write_seeds(place / "many.gpkg", points)
    line = [sys.executable, "-m", "roadhem.cli", "trace", "tile.tif", "--seeds", "many.gpkg", "--out", "o.gpkg"]
    line += ["--model", "model", "--workers", str(workers)]
    process = subprocess.Popen(line, stdout=subprocess.PIPE, stderr=subprocess.PIPE, text=True)
    journal = place / "o.gpkg.journal"
    until = time.monotonic() + 60
    while time.monotonic() < until and not (journal.exists() and journal.read_text().count("\n") > 1):
        time.sleep(0.01)
    process.send_signal(signal.SIGINT)
    out, err = process.communicate(timeout=60)
    assert (process.returncode, out) == (1, "")
    assert err == "roadhem: Stopped before it was done; what was there before is unchanged.\n"
    assert (place / "o.gpkg").read_text() == "old"


# Shelf


def test_shelf_lists_shipped_and_own_models(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Should list models of the package and of $ROADHEM_HOME, and show a card."""
    monkeypatch.setenv("ROADHEM_HOME", str(tmp_path))
    drawn_model(tmp_path / "shelf" / "mine", "mine")
    assert [m.name for m in shelf() if not m.shipped] == ["mine"]
    assert find_model("mine") == tmp_path / "shelf" / "mine"
    rows = json.loads(cli("shelf", "list", "--json").stdout)["models"]
    assert rows[-1] == {"name": "mine", "shipped": False, "folder": str(tmp_path / "shelf" / "mine")}
    assert json.loads(cli("shelf", "show", "mine", "--json").stdout)["weights_sha256"]
    assert "weights_sha256" in cli("shelf", "show", "mine").stdout
    missing = cli("shelf", "show", "yours")
    assert missing.returncode == 2
    assert "mine" in missing.stderr
    (tmp_path / "shelf" / "mine" / "card.json").write_text("milk")
    assert cli("shelf", "list").returncode == 2


# Pictures and pages


def simulated(colours: list[str], matrix: list[list[float]]) -> np.ndarray:
    """Colours as people with a missing cone see them, in CIELAB."""
    from skimage.color import rgb2lab

    rgb = np.array([[int(c[i : i + 2], 16) / 255 for i in (1, 3, 5)] for c in colours])
    linear = np.where(rgb <= 0.04045, rgb / 12.92, ((rgb + 0.055) / 1.055) ** 2.4)
    seen = np.clip(linear @ np.array(matrix).T, 0, 1)
    back = np.where(seen <= 0.0031308, 12.92 * seen, 1.055 * seen ** (1 / 2.4) - 0.055)
    return rgb2lab(back[None])[0]


SIGHTS = {
    "all cones": [[1, 0, 0], [0, 1, 0], [0, 0, 1]],
    # Machado, Oliveira, Fernandes 2009, severity 1.0 (from memory); rows sum to 1.
    "protanopia": [[0.152286, 1.052583, -0.204868], [0.114503, 0.786281, 0.099216], [-0.003882, -0.048116, 1.051998]],
    "deuteranopia": [
        [0.367322, 0.860646, -0.227968],
        [0.280085, 0.672501, 0.047413],
        [-0.011820, 0.042940, 0.968881],
    ],
    "tritanopia": [[1.255528, -0.076749, -0.178779], [-0.078411, 0.930809, 0.147602], [0.004733, 0.691367, 0.303900]],
}


@pytest.mark.parametrize("sight", SIGHTS)
def test_colours_are_told_apart_by_everyone(sight: str) -> None:
    """Should keep any two steps of spread at least 30 CIE76 units apart, for any colour vision."""
    lab = simulated(list(SPREAD_COLOURS), SIGHTS[sight])
    apart = [np.linalg.norm(lab[i] - lab[j]) for i in range(len(lab)) for j in range(i)]
    assert min(apart) >= 30, sight


def test_steps_of_spread() -> None:
    """Should sort spreads into as many steps as there are colours and names."""
    assert [step_of(s) for s in (0.0, 0.03, 0.031, 0.06, 0.1, 0.2, 3.0)] == [0, 0, 1, 1, 2, 3, 4]
    assert len(step_names()) == len(SPREAD_COLOURS) == len(SPREAD_LIMITS_M) + 1
    assert [round_length(x) for x in (0.9, 7, 23, 51, 999)] == [0.5, 5, 20, 50, 500]


class Ramp:
    """A mosaic whose red says the column; remembers the largest window it was asked for."""

    most = 0

    def read(self, row: int, col: int, rows: int, cols: int) -> Patch:
        """Read a window."""
        self.most = max(self.most, rows * cols)
        red = np.broadcast_to(np.arange(col, col + cols) / 20_000, (rows, cols))
        colour = np.stack([red, red * 0, red * 0]).astype(np.float32)
        return Patch(colour, np.full((rows, cols), 2, np.uint8), None)


def test_backdrop_of_a_large_mosaic_is_read_in_blocks() -> None:
    """Should average whole pixels into a small picture without ever holding the mosaic."""
    mosaic = Ramp()
    picture, bounds = backdrop(mosaic, (0.0, -300.0, 2000.0, 0.0), most=1000)
    assert picture.shape == (150, 1000, 4)
    assert bounds == pytest.approx((0, -300, 2000, 0))
    np.testing.assert_allclose(picture[75, :, 0], (np.arange(1000) * 20 + 9.5) / 20_000, rtol=1e-4)
    assert mosaic.most <= 1100**2


def test_picture_shows_lines_and_marks(tmp_path: Path) -> None:
    """Should draw sure lines in the colour of their spread, wide enough to read, with a legend below."""
    seeds = write_seeds(tmp_path / "s.gpkg", [*PLACES, (EAST + 50, NORTH - 3)])
    summary = trace_tiles(TraceJob(INPUTS, str(seeds), tmp_path / "o.gpkg"), open_made, silent)
    session = summary.session
    target = tmp_path / "Bild é.png"
    draw_traced(target, session, session.bounds_m, session.grid, summary.layers, "streets")
    image = cv2.imdecode(np.frombuffer(target.read_bytes(), np.uint8), cv2.IMREAD_COLOR)[..., ::-1]
    height, width, _ = image.shape
    assert width >= 1600
    spread = summary.layers.edges.rows[0]["spread_m"]
    colour = [int(SPREAD_COLOURS[step_of(spread)][i : i + 2], 16) for i in (1, 3, 5)]
    drawn = (np.abs(image.astype(int) - colour).sum(axis=-1) < 12)[: int(height * 0.8)]
    length_px = sum(row["length_m"] for row in summary.layers.edges.rows) * width / 100
    assert drawn.sum() > 1.5 * length_px
    assert [p.name for p in tmp_path.glob("*part*")] == []


def test_picture_without_any_line(tmp_path: Path) -> None:
    """Should show the tiles and the crosses when nothing was placed."""
    seeds = write_seeds(tmp_path / "s.gpkg", [(EAST + 50, NORTH - 3), None])
    summary = trace_tiles(TraceJob(INPUTS, str(seeds), tmp_path / "o.gpkg"), open_made, silent)
    session = summary.session
    draw_traced(tmp_path / "p.png", session, session.bounds_m, session.grid, summary.layers, "nothing")
    assert (tmp_path / "p.png").stat().st_size > 5000


def test_page_needs_nothing_else(tmp_path: Path) -> None:
    """Should hold picture, figures and cautions in one file that names no other, with markup escaped."""
    cv2.imwrite(str(tmp_path / "p.png"), np.zeros((9, 9, 3), np.uint8))
    tables = [Figures("Traced", [("lines", "3 < 4")], "A note.")]
    write_page(tmp_path / "é.html", "Town & 7", "A lead.", tables, tmp_path / "p.png", "Lines.")
    html = (tmp_path / "é.html").read_text(encoding="utf-8")
    assert "Town &amp; 7" in html
    assert "3 &lt; 4" in html
    assert "data:image/png;base64," in html
    assert not re.search(r"(src|href)=[\"'](?!data:)", html)
    assert "http" not in html
    assert "not a survey" in html
    assert html.count("<li>") == len(CAUTIONS)
    assert "licensed" in html


@pytest.mark.parametrize(
    "seed", [3, pytest.param(4, marks=pytest.mark.long), pytest.param(5, marks=pytest.mark.long)]
)
def test_demo_makes_all_it_promises(tmp_path: Path, seed: int) -> None:
    """Should run from a town to its page by the public verbs, and say where everything is."""
    demo = Path(__file__).parents[2] / "tools" / "demo.py"
    line = [sys.executable, str(demo), "--seed", str(seed), "--size", "768", "--out", str(tmp_path)]
    done = subprocess.run(line, capture_output=True, text=True, encoding="utf-8", check=False)
    assert done.returncode == 0, done.stderr
    for name in ("lines.gpkg", "lines.png", "index.html"):
        assert str(tmp_path / name) in done.stdout
        assert (tmp_path / name).stat().st_size > 10_000
    assert re.search(r"completeness +\d\.\d{3}", done.stdout)
