from __future__ import annotations

import hashlib
import json
from collections.abc import Callable
from pathlib import Path

import numpy as np
import psutil
import pytest
from affine import Affine
from net_made import CALIBRATION, RECEPTIVE_FIELD, deep_net, mean_net, write_model
from numpy.typing import NDArray
from onnx import TensorProto, helper
from scipy.ndimage import gaussian_filter

from roadhem.errors import BadInput
from roadhem.fields.inputs import INPUTS, relief
from roadhem.fields.layout import CHANNELS, COVER, NET_FIELDS, QUANTUM
from roadhem.fields.model import Model
from roadhem.fields.quantise import quantise
from roadhem.fields.store import BLANK, PAGE, PAGE_BYTES, PAGE_PIXELS, FieldStore
from roadhem.tiles.mosaic import Mosaic
from roadhem.tiles.tile import ArrayTile

CRS = "EPSG:25832"
P, Q = -109_374, 9_768
"""The page at the tiles' upper left."""
EAST, NORTH = 51.2 * Q, -51.2 * P
ROW, COL = P * PAGE_PIXELS, Q * PAGE_PIXELS
DEFAULT_SHAPE = (1450, 1440)


@pytest.fixture(scope="module")
def deep(tmp_path_factory: pytest.TempPathFactory) -> Model:
    return Model.load(write_model(tmp_path_factory.mktemp("deep"), deep_net()))


@pytest.fixture(scope="module")
def plain(tmp_path_factory: pytest.TempPathFactory) -> Model:
    return Model.load(write_model(tmp_path_factory.mktemp("plain"), mean_net()))


def at(row: float = 0, col: float = 0, pixel: float = 0.1) -> Affine:
    return Affine(pixel, 0, EAST + col * pixel, 0, -pixel, NORTH - row * pixel)


def image(shape: tuple[int, int] = DEFAULT_SHAPE, seed: int = 3) -> NDArray[np.uint8]:
    rng = np.random.default_rng(seed)
    return rng.integers(0, 256, (3, *shape), dtype=np.uint8)


def ground(shape: tuple[int, int]) -> NDArray[np.float32]:
    rough = np.random.default_rng(8).normal(0, 6, shape)
    return (gaussian_filter(rough, 6) + 120).astype(np.float32)


def scene(*, heights: bool = True, pixel: float = 0.1) -> Mosaic:
    tiles = [ArrayTile.of(image(), at(40, 70, pixel), CRS)]
    return Mosaic.of(tiles, [ArrayTile.of_heights(ground((600, 600)), at(0, 0, 0.25), CRS)] if heights else [])


PAGES = [(P + p, Q + q) for p in range(-1, 4) for q in range(-1, 4)]


def test_pages_are_the_same_whatever_the_block(deep: Model) -> None:
    """Should give the same bits for strips of 1, 2 and 3 pages, all loaded at once or singly, in any order."""
    mosaic = scene()
    expected = FieldStore(mosaic, deep, strip=1).load(PAGES)
    assert sum(page is not BLANK for page in expected.values()) == 9
    assert len({page.tobytes() for page in expected.values() if page is not BLANK}) == 9
    for side in (2, 3):
        found = FieldStore(mosaic, deep, strip=side).load(PAGES)
        assert {place: page.tobytes() for place, page in found.items()} == {
            place: page.tobytes() for place, page in expected.items()
        }
    single = FieldStore(mosaic, deep)
    for place in PAGES[::-1]:
        assert single.page(*place).tobytes() == expected[place].tobytes()


def test_strips_save_runs(deep: Model, monkeypatch: pytest.MonkeyPatch) -> None:
    """Should run the net on pairs of pages beside or below one another, and on single ones else."""
    ran: list[tuple[int, int]] = []
    session = Model.session

    def counted(self: Model, rows: int, cols: int, threads: int) -> object:
        ran.append((rows, cols))
        return session(self, rows, cols, threads)

    monkeypatch.setattr(Model, "session", counted)
    mosaic = Mosaic.of([ArrayTile.of(image(), at(), CRS)])
    small, large = PAGE_PIXELS + 2 * deep.halo, 2 * PAGE_PIXELS + 2 * deep.halo
    FieldStore(mosaic, deep).load([(P, Q), (P, Q + 1), (P + 1, Q), (P + 2, Q), (P + 2, Q + 2)])
    assert ran == [(small, large), (large, small), (small, small)]


@pytest.mark.parametrize("pixel", [0.1, 0.06, 0.12])
def test_cut_tiles_give_the_same_fields(deep: Model, pixel: float) -> None:
    """Should give the same bits for one file as for its pixels cut into tiles, in any order of them."""
    whole, pieces = image(), []
    for rows in (slice(0, 333), slice(333, 1450)):
        for cols in (slice(0, 700), slice(700, 1440)):
            transform = at(40 + rows.start, 70 + cols.start, pixel)
            pieces.append(ArrayTile.of(whole[:, rows, cols], transform, CRS, name=f"{rows.start} {cols.start}"))
    expected = FieldStore(scene(heights=False, pixel=pixel), deep).load(PAGES)
    for tiles in (pieces, pieces[::-1]):
        found = FieldStore(Mosaic.of(tiles), deep).load(PAGES)
        assert all(found[place].tobytes() == expected[place].tobytes() for place in PAGES)


def test_distant_tile_changes_nothing(deep: Model) -> None:
    """Should give the same fields of a tile's cells whether or not another tile lies further than the halo."""
    near = ArrayTile.of(image((400, 400)), at(0, 0), CRS, name="near")
    far = ArrayTile.of(image((300, 300)), at(0, 400 + 2 * RECEPTIVE_FIELD), CRS, name="far")
    alone = FieldStore(Mosaic.of([near]), deep).page(P, Q)
    both = FieldStore(Mosaic.of([near, far]), deep).page(P, Q)
    assert alone[:, :200].tobytes() == both[:, :200].tobytes()
    assert alone.tobytes() != both.tobytes()


def test_threads_change_nothing(deep: Model) -> None:
    """Should give the same bits with two threads of the net as with one."""
    one, two = (FieldStore(scene(), deep, threads=threads).page(P, Q) for threads in (1, 2))
    assert one.tobytes() == two.tobytes()


def test_too_small_a_halo_would_show(deep: Model, monkeypatch: pytest.MonkeyPatch) -> None:
    """Should depend on the halo: without it, pages differ with the block, so that the tests above can fail."""
    monkeypatch.setitem(deep.card, "receptive_field", 0)
    mosaic = scene()
    one, two = (FieldStore(mosaic, deep, strip=side).load(PAGES) for side in (1, 2))
    assert any(one[place].tobytes() != two[place].tobytes() for place in PAGES)


def test_cells_lie_where_the_layout_says(plain: Model) -> None:
    """Should put cell (i, j) over working pixels 2i, 2i + 1 and 2j, 2j + 1, with what the mosaic holds there."""
    mosaic = scene()
    page = FieldStore(mosaic, plain).page(P, Q)
    patch = mosaic.read(ROW, COL, PAGE_PIXELS, PAGE_PIXELS)
    red = (patch.colour[0].astype(np.float64) - 0.45) / 0.25 * (patch.cover == 2)
    expected = np.rint(red.reshape(PAGE, 2, PAGE, 2).mean(axis=(1, 3)) * 1e4)
    inside = page[..., COVER] == 2
    assert inside.sum() == (256 - 20) * (256 - 35)
    assert np.abs(page[..., 0] - expected)[inside].max() <= 1


def test_relief_reaches_over_the_border_of_a_page(plain: Model) -> None:
    """Should give the relief of heights read around the block, as `relief` gives it of the whole."""
    mosaic = scene()
    page = FieldStore(mosaic, plain).page(P, Q)
    height = mosaic.read_height(ROW - 30, COL - 30, PAGE_PIXELS + 60, PAGE_PIXELS + 60)
    assert height is not None
    expected = np.rint(relief(height)[0].reshape(PAGE, 2, PAGE, 2).astype(np.float64).mean(axis=(1, 3)) * 1e4)
    inside = page[..., COVER] == 2
    assert np.ptp(expected) > 1_000
    assert np.abs(page[..., INPUTS.index("relief")] - expected)[inside].max() <= 1


def test_nothing_where_there_is_no_tile(deep: Model, monkeypatch: pytest.MonkeyPatch) -> None:
    """Should hand out blank pages without running the net, and clear cells outside the tiles."""
    monkeypatch.setattr(Model, "session", lambda *_: pytest.fail("the net was run"))
    store = FieldStore(scene(), deep)
    assert store.ready(P - 1, Q)
    assert not store.page(P - 1, Q).any()
    assert store.page(P - 1, Q).shape == (PAGE, PAGE, CHANNELS)
    monkeypatch.undo()
    page = store.page(P, Q)
    assert not page[:20].any()
    assert not page[:, :35].any()
    assert page[20:, 35:, :COVER].any()


def test_no_data_is_told(deep: Model) -> None:
    """Should mark a cell as without data when one of its four pixels is."""
    tile = ArrayTile.of(image(), at(), CRS)
    tile.valid = np.ones(DEFAULT_SHAPE, bool)
    tile.valid[100:103, 200:260] = False
    cover = FieldStore(Mosaic.of([tile]), deep).page(P, Q)[..., COVER]
    assert (cover[50:52, 100:130] == 1).all()
    assert (cover == 1).sum() == 2 * 30


def test_cache_keeps_its_bound(deep: Model) -> None:
    """Should return every page of a load, keep only what the bound allows, and hand out the same again."""
    store = FieldStore(scene(), deep, cache_mb=2.5 * PAGE_BYTES / 2**20)
    first = store.load(PAGES)
    kept = [place for place in PAGES if first[place] is not BLANK and store.ready(*place)]
    assert len(kept) == 2
    again = store.load(PAGES)
    assert all(again[place].tobytes() == first[place].tobytes() for place in PAGES)
    last = kept[-1]
    assert store.page(*last) is store.page(*last)


def test_pages_are_read_only(deep: Model) -> None:
    """Should hand out pages that cannot be changed under another's hands."""
    with pytest.raises(ValueError, match="read-only"):
        FieldStore(scene(), deep).page(P, Q)[0, 0, 0] = 1


def test_memory_stays_bounded(deep: Model) -> None:
    """Should not grow with the number of pages that pass through."""
    mosaic = Mosaic.of([ArrayTile.of(image((2048, 6144)), at(), CRS)])
    store = FieldStore(mosaic, deep, cache_mb=8)
    store.load([(P + p, Q + q) for p in range(4) for q in range(2)])
    before = psutil.Process().memory_info().rss
    for q in range(2, 12, 2):
        store.load([(P + p, Q + q + i) for p in range(4) for i in (0, 1)])
    assert psutil.Process().memory_info().rss - before < 60 * 2**20


def test_quantise_rounds_half_to_even_and_clips() -> None:
    """Should round half to even, clip to 16 bits, take NaN as 0 and calibrate log sigma [built]."""
    fields = np.zeros((len(NET_FIELDS), 1, 6), np.float32)
    dx, sigma = NET_FIELDS.index("dx"), NET_FIELDS.index("log_sigma")
    fields[dx, 0] = [0.0005 * 5, -0.0005, 0.0015, 99, -99, np.nan]
    fields[sigma, 0] = [-1, 0, 1, 2, -2, 0]
    cover = np.array([[2, 2, 2, 2, 2, 0]], np.uint8)
    counts = quantise(fields, cover, (0.25, 1.1))
    assert counts[0, :, dx].tolist() == [2, 0, 2, 32767, -32767, 0]
    assert counts[0, :5, sigma].tolist() == [-850, 250, 1350, 2450, -1950]
    assert counts[0, 5].tolist() == [0] * CHANNELS
    assert counts[0, :, COVER].tolist() == cover[0].tolist()


def test_calibration_comes_from_the_card(plain: Model) -> None:
    """Should store a + b log_sigma with the card's a and b: the mean net's seventh field is red, calibrated."""
    page = FieldStore(scene(), plain).page(P, Q)
    inside = page[..., COVER] == 2
    red, sigma = page[..., 0][inside] * 1e-4, page[..., NET_FIELDS.index("log_sigma")][inside] * QUANTUM["log_sigma"]
    np.testing.assert_allclose(sigma, CALIBRATION["a"] + CALIBRATION["b"] * red, atol=7e-4)


# Models


def _other_graph() -> bytes:
    x = helper.make_tensor_value_info("x", TensorProto.FLOAT, [1, 3])
    y = helper.make_tensor_value_info("y", TensorProto.FLOAT, [1, 3])
    graph = helper.make_graph([helper.make_node("Relu", ["x"], ["y"])], "g", [x], [y])
    model = helper.make_model(graph, opset_imports=[helper.make_opsetid("", 17)], ir_version=8)
    return bytes(model.SerializeToString())


def _rewrite_weights(folder: Path, content: bytes, *, honest: bool) -> None:
    (folder / "weights.onnx").write_bytes(content)
    if honest:
        _change_card(folder, weights_sha256=hashlib.sha256(content).hexdigest())


def _change_card(folder: Path, **changes: object) -> None:
    card = json.loads((folder / "card.json").read_text())
    (folder / "card.json").write_text(json.dumps(card | changes))


def _flip(folder: Path) -> None:
    content = bytearray((folder / "weights.onnx").read_bytes())
    content[len(content) // 2] ^= 1
    _rewrite_weights(folder, bytes(content), honest=False)


SPOILED: dict[str, tuple[Callable[[Path], object], str]] = {
    "a flipped bit": (_flip, "weights do not match its card"),
    "another graph": (lambda folder: _rewrite_weights(folder, _other_graph(), honest=True), "not a Roadhem net"),
    "a text file": (lambda folder: _rewrite_weights(folder, b"hello", honest=True), "not a Roadhem net"),
    "other channels": (lambda folder: _change_card(folder, inputs=["red"]), "another version"),
    "other fields": (lambda folder: _change_card(folder, fields=list(NET_FIELDS[::-1])), "another version"),
    "other normalisation": (lambda f: _change_card(f, normalisation={"mean": 0.5, "deviation": 0.25}), "another"),
    "fewer outputs": (lambda folder: write_model(folder, deep_net(fields=13)), "other fields"),
    "no halo": (lambda folder: _change_card(folder, receptive_field=None), "receptive_field"),
    "no calibration": (lambda folder: _change_card(folder, calibration={"a": "x"}), "calibration"),
    "no card": (lambda folder: (folder / "card.json").unlink(), "is not a Roadhem model"),
    "no weights": (lambda folder: (folder / "weights.onnx").unlink(), "has no weights.onnx"),
    "card of text": (lambda folder: (folder / "card.json").write_text("{oh"), "cannot be read"),
    "card of numbers": (lambda folder: (folder / "card.json").write_text("[1]"), "no model's card"),
}


@pytest.mark.parametrize("case", SPOILED)
def test_model_that_does_not_fit_is_refused(tmp_path: Path, case: str) -> None:
    """Should refuse a model whose weights, channels or card do not fit, in one sentence."""
    folder = write_model(tmp_path / "strange model", mean_net())
    spoil, words = SPOILED[case]
    spoil(folder)
    with pytest.raises(BadInput) as refused:
        Model.load(folder)
    assert words in str(refused.value)
    assert str(refused.value).endswith(".")
    assert "\n" not in str(refused.value)


def test_model_is_found_by_path_and_name(tmp_path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    """Should load a model by its folder, by its weights' file and by its name on the shelf."""
    monkeypatch.setenv("ROADHEM_HOME", str(tmp_path))
    folder = write_model(tmp_path / "shelf" / "night-3", mean_net(), name="night-3")
    by = [Model.load(folder), Model.load(folder / "weights.onnx"), Model.load("night-3")]
    assert {model.name for model in by} == {"night-3"}
    with pytest.raises(BadInput, match="no model 'night-4'"):
        Model.load("night-4")
    with pytest.raises(BadInput, match="no model"):
        Model.load("../shelf/night-9")


def test_halo_is_whole_strides(deep: Model) -> None:
    """Should round the receptive field up to whole strides, so that blocks begin on the coarsest level's cells."""
    assert [model.halo for model in (deep, Model("m", deep.card | {"receptive_field": 81}, b""))] == [32, 96]


def _shipped() -> Model:
    try:
        return Model.load()
    except BadInput:
        pytest.skip("the shipped model is not there yet")


def test_shipped_model_sees_as_far_as_its_card_says() -> None:
    """Should change no cell further from a changed pixel than the card's receptive field, and some cells near it."""
    model = _shipped()
    radius, side = int(model.card["receptive_field"]), 512
    session = model.session(side, side, 1)
    rng = np.random.default_rng(0)
    tiles = rng.normal(0, 1, (1, len(INPUTS), side, side)).astype(np.float32)
    before = session.run(["fields"], {"tiles": tiles})[0][0]
    for row, col in ((256, 256), (263, 249), (255, 271)):
        changed = tiles.copy()
        changed[0, :, row, col] += 50
        moved = np.argwhere((session.run(["fields"], {"tiles": changed})[0][0] != before).any(axis=0))
        assert len(moved)
        reach = np.maximum(np.abs(2 * moved - (row, col)), np.abs(2 * moved + 1 - (row, col))).max()
        assert reach <= radius, (row, col, int(reach))


def test_shipped_model_gives_the_same_pages_whatever_the_block(real: Path) -> None:
    """Should hold to the last bit for the shipped net on a real photograph, in any block and cut of it."""
    model = _shipped()
    mosaic = Mosaic.open([real / "carpark" / "image.tif"])
    minx, miny, maxx, maxy = mosaic.bounds_m
    size = PAGE_PIXELS * 0.1
    places = [(p, q) for p in range(int(-maxy // size), int(-miny // size) + 1)
              for q in range(int(minx // size), int(maxx // size) + 1)]  # fmt: skip
    expected = FieldStore(mosaic, model, strip=1).load(places)
    found = FieldStore(mosaic, model, strip=2).load(places[::-1])
    assert all(found[place].tobytes() == expected[place].tobytes() for place in places)
    assert any(page[..., :COVER].any() for page in expected.values())
