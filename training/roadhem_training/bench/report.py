"""What the page says: the figures of each group in tables, the cases in pictures."""

from __future__ import annotations

from collections.abc import Mapping, Sequence
from typing import Any

from roadhem.tiles.mosaic import Mosaic
from roadhem_training.bench.baselines import PIECE_M
from roadhem_training.bench.cases import Case
from roadhem_training.bench.corrections import HAND_STEP_M, MOST
from roadhem_training.bench.findings import Findings
from roadhem_training.bench.goals import COVERED, GOALS
from roadhem_training.bench.page import Cell, Part, Picture, Sheet, cells, figure_text
from roadhem_training.bench.pictures import (
    SEED_COLOUR,
    TRACED_COLOUR,
    TRUE_COLOUR,
    UNSCORED_COLOUR,
    draw_case,
    draw_reliability,
)
from roadhem_training.bench.rivals import Tuned
from roadhem_training.bench.spread import Misses

KEYS = (
    (TRUE_COLOUR, "truth"),
    (UNSCORED_COLOUR, "truth, hidden or unsure (not scored)"),
    (TRACED_COLOUR, "traced line"),
    (SEED_COLOUR, "seed"),
)
SET_COLUMNS = (
    "truth, m", "completeness at 0.15 m", "correctness at 0.15 m", "completeness at 0.30 m", "correctness at 0.30 m",
    "lateral median, m", "lateral 95 %, m",
)  # fmt: skip
MEASURED = (
    "Lengths of all sets of a group are pooled. Completeness and correctness: parts within the buffer of the other "
    "side (true distance). Hidden and unsure truth is neither missed nor wrong.",
    "Lateral: distance of traced places, every 0.1 m, to the truth; those beyond 2 m count as outside of every "
    "share.",
    "On a wrong parallel line: traced length 0.30–1.5 m from the nearest truth, within 15° of its heading, for 2 m "
    "or more. Hidden stretches: up to 8 m long, between visible ones; bridged when lines pass within 0.5 m of all "
    "of it.",
    "Corrections: clicks beyond the first until 95 % of a visible edge (from 5 m) lies within 0.30 m of its lines. "
    "Each click is exact, in the middle of the largest gap; it serves as a seed of its own and as one more point of "
    f"the trace through all clicks. An edge is given up after {MOST} clicks, or one for every {HAND_STEP_M:g} m if "
    "that is fewer.",
    "The minimal path is given exact clicks at both ends of every edge, hidden stretches within it included, in "
    f"pieces of at most {PIECE_M:g} m; the skeleton needs no click. Both see the same fields, and their settings "
    "were chosen on these very sets, which favours them.",
)


def parts_of(
    groups: Mapping[str, Sequence[Findings]],
    figures: Mapping[str, Any],
    rivals: Mapping[str, Sequence[Tuned]],
    cases: Mapping[str, tuple[str, Sequence[Case]]],
    missing: str,
) -> list[Part]:
    """Compose the page.

    Parameters
    ----------
    groups, figures, rivals : by group. cases : title to (group, cases).
    missing : a sentence on sets that are not there, or "".
    """
    notes = [missing] if missing else []
    first = Part("Figures", notes, [goal_table(g, figures[g], rivals[g]) for g in groups])
    return [
        first,
        Part("How it was measured", MEASURED),
        Part("By set", tables=[set_table(g, figures[g]) for g in groups]),
        Part("By kind and sight of the truth", tables=[t for g in groups for t in class_tables(g, figures[g])]),
        Part("Clicks and seeds", tables=[seed_table(g, figures[g]) for g in groups]),
        spread_part(groups, figures),
        Part("Doubts", ["The heaviest tenth of all doubts, and what lies within 5 m of them."],
             [Sheet(g, ("figure", ""), [cells(k, v) for k, v in figures[g]["doubts"].items()]) for g in groups]),
        Part("Tuning log of the baselines", ["The setting marked was kept: the largest completeness + correctness at "
             "0.30 m."], [log_table(g, tuned) for g in groups for tuned in rivals[g]]),
        *(Part(title, pictures=case_pictures(chosen, groups[g]), keys=KEYS) for title, (g, chosen) in cases.items()),
    ]  # fmt: skip


def headline(figures: Mapping[str, Any]) -> dict[str, float]:
    """Gather the figures that have goals."""
    seeds = figures["seeds"]
    return {
        **figures["lines"],
        "corrections per 100 m": figures["clicks"]["corrections per 100 m"],
        "unplaced far from any edge": seeds["far from any edge"]["unplaced"],
        "unplaced on a lane line": seeds["on a lane line"]["unplaced"],
        "Spearman": figures["spread"]["Spearman"],
    }


def goal_table(group: str, figures: Mapping[str, Any], rivals: Sequence[Tuned]) -> Sheet:
    """Compare with goals and baselines."""
    rows = []
    for name, value in headline(figures).items():
        goal = GOALS[group].get(name)
        short = goal.short_by(value) if goal else 0.0
        rows.append([
            Cell(name), Cell(figure_text(value), missed=short > 0), Cell(str(goal) if goal else ""),
            Cell(figure_text(short) if short > 0 else ""),
            *(Cell(figure_text(rival.figures[name]) if name in rival.figures else "") for rival in rivals),
        ])  # fmt: skip
    clicks = [Cell(figure_text(rival.figures.get("clicks per 100 m", 0.0))) for rival in rivals]
    ours = figures["clicks"]["seeds and corrections per 100 m"]
    rows.append([*cells("clicks per 100 m in all", ours, "", ""), *clicks])
    return Sheet(group, ("figure", "Roadhem", "goal", "short by", *(rival.name for rival in rivals)), rows)


def set_table(group: str, figures: Mapping[str, Any]) -> Sheet:
    """Line figures of each set."""
    rows = [cells(name, *(one[column] for column in SET_COLUMNS)) for name, one in figures["each set"].items()]
    return Sheet(group, ("set", *SET_COLUMNS), rows)


def class_tables(group: str, figures: Mapping[str, Any]) -> list[Sheet]:
    """Figures by kind and by sight."""
    tables = []
    for by in ("by kind", "by sight"):
        classes = figures[by]
        head = list(next(iter(classes.values())))
        tables.append(Sheet(f"{group}, {by}", ("", *head), [cells(n, *one.values()) for n, one in classes.items()]))
    return tables


def seed_table(group: str, figures: Mapping[str, Any]) -> Sheet:
    """Clicks, and seeds that gave nothing."""
    rows = [cells(name, value, "") for name, value in figures["clicks"].items()]
    for where, one in figures["seeds"].items():
        bounds = f"{one['low']:.3f}–{one['high']:.3f}" if one.get("low", float("nan")) >= 0 else ""
        rows.append(cells(f"seeds {where}: {one['tried']} tried, share unplaced", one["unplaced"], bounds))
    return Sheet(group, ("figure", "", "95 % bounds"), rows)


def spread_part(groups: Mapping[str, Sequence[Findings]], figures: Mapping[str, Any]) -> Part:
    """Coverage in all and in each fifth, scores, and the reliability picture."""
    tables = []
    for group in groups:
        spread = figures[group]["spread"]
        rows = [_coverage_row("all", spread["coverage"])]
        for n, one in enumerate(spread["fifths"], start=1):
            name = f"fifth {n}: {one['spread from, m']:.3f}–{one['spread to, m']:.3f} m"
            rows.append(_coverage_row(name, one))
        rows += [cells(name, spread[name], "", "", "") for name in ("Spearman", "NLL, nats", "AUSE, m")]
        tables.append(Sheet(group, ("places every 10 m", "68 %", "bounds", "95 %", "bounds"), rows))
    address = draw_reliability([(g, Misses.joined([one.misses for one in found])) for g, found in groups.items()])
    notes = (
        "Share of errors inside the 68 % and 95 % intervals of the stated spread, with exact 95 % bounds (Clopper & "
        "Pearson 1934); marked where it lies outside 0.63–0.73 or 0.92–0.97. On real sets the drawn truth is itself "
        "0.1–0.3 m off (95 %), which no spread of a line can hold.",
    )
    caption = "Reliability: on the dotted line a spread holds what it says."
    return Part("Spread", notes, tables, [Picture(address, caption)])


def _coverage_row(name: str, coverage: Mapping[str, Any]) -> list[Cell]:
    row = [Cell(name)]
    for share, (low, high) in COVERED.items():
        one = coverage[share]
        row.append(Cell(figure_text(one["held"]), missed=not low <= one["held"] <= high))
        row.append(Cell(f"{one['low']:.3f}–{one['high']:.3f}"))
    return row


def log_table(group: str, tuned: Tuned) -> Sheet:
    """Every setting that was tried."""
    rows = [
        cells(f"{one.setting}{' ← kept' if n == tuned.best else ''}", one.completeness, one.correctness)
        for n, one in enumerate(tuned.log)
    ]
    return Sheet(f"{group}: {tuned.name}", ("setting", "completeness at 0.30 m", "correctness at 0.30 m"), rows)


def case_pictures(cases: Sequence[Case], found: Sequence[Findings]) -> list[Picture]:
    """Draw cases."""
    pictures = []
    for case in cases:
        one = found[case.index]
        tiles = one.inputs
        address = draw_case(case, one, Mosaic.open(tiles.tiles, tiles.height, tiles.crs))
        pictures.append(Picture(address, f"{one.bench_set.title}: {case.words}"))
    return pictures
