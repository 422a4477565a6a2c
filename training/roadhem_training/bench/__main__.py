"""Measure a model and write the benchmark page.

    python -m roadhem_training.bench --model model/roadhem/shelf --out build/bench
"""

from __future__ import annotations

import json
import math
import shlex
import sys
from datetime import datetime, timezone
from pathlib import Path
from typing import Any

import click

from roadhem.errors import RoadhemError
from roadhem.lines.files import whole_file
from roadhem_training.bench.cases import best_cases, worst_cases
from roadhem_training.bench.findings import Findings, examine_all, figures_of
from roadhem_training.bench.page import write_bench_page
from roadhem_training.bench.report import parts_of
from roadhem_training.bench.rivals import Tuned, tuned_rivals
from roadhem_training.bench.sets import invented_sets, real_sets


@click.command()
@click.option("--model", type=click.Path(exists=True, file_okay=False, path_type=Path), required=True)
@click.option("--out", type=click.Path(file_okay=False, path_type=Path), required=True)
@click.option("--scenes", type=click.IntRange(min=1), default=24, show_default=True, help="Invented scenes.")
@click.option("--real", type=click.Path(path_type=Path), default=Path("../shared/real"), show_default=True)
def main(model: Path, out: Path, scenes: int, real: Path) -> None:
    """Measure MODEL on held-out invented scenes and on real sets."""
    lines = out / "lines"
    lines.mkdir(parents=True, exist_ok=True)
    missing = "" if real.is_dir() else f"{real.parent} is missing: nothing was measured on real sets."
    try:
        sets = [*invented_sets(out / "scenes", scenes), *real_sets(real)]
        groups = grouped(examine_all(sets, model, lines))
    except RoadhemError as error:
        raise click.ClickException(str(error)) from error
    figures = {group: figures_of(found) for group, found in groups.items()}
    rivals = {group: tuned_rivals(found) for group, found in groups.items()}
    card = json.loads((model / "card.json").read_text(encoding="utf-8"))
    made = datetime.now(timezone.utc).isoformat(timespec="minutes")
    command = shlex.join(["python", "-m", "roadhem_training.bench", *sys.argv[1:]])
    baselines = {group: [_of_rival(rival) for rival in tuned] for group, tuned in rivals.items()}
    record = {"made": made, "command": command, "model": _of_card(card), "missing": missing}
    write_json(out / "figures.json", {**record, "figures": figures, "baselines": baselines})
    write_bench_page(
        out / "index.html",
        f"What model “{card['name']}” is worth",
        f"{scenes} invented scenes it was never trained on and {len(sets) - scenes} real sets; "
        f"trained for {card['training'].get('steps', '?')} steps.",
        f"Measured {made} by",
        command,
        parts_of(groups, figures, rivals, cases_of(groups), missing),
    )
    click.echo(f"{missing + chr(10) if missing else ''}page {out / 'index.html'}, figures {out / 'figures.json'}")


def grouped(found: list[Findings]) -> dict[str, list[Findings]]:
    """Sort findings by the group of their set, in the order of the sets."""
    groups: dict[str, list[Findings]] = {}
    for one in found:
        groups.setdefault(one.bench_set.group, []).append(one)
    return groups


def cases_of(groups: dict[str, list[Findings]]) -> dict[str, Any]:
    """Choose the cases of each group, by title."""
    chosen: dict[str, Any] = {}
    for group, found in groups.items():
        chosen[f"Worst cases, {group}"] = (group, worst_cases(found))
        chosen[f"Best cases, {group}"] = (group, best_cases(found))
    return chosen


def write_json(path: Path, record: Any) -> None:
    """Write a record; NaN becomes null, and infinity, which stands for beyond the search radius, "over 2 m"."""
    with whole_file(path) as part:
        part.write_text(json.dumps(plain(record), indent=2, ensure_ascii=False) + "\n", encoding="utf-8")


def plain(value: Any) -> Any:
    """Bring a record to what JSON can hold."""
    if isinstance(value, dict):
        return {key: plain(one) for key, one in value.items()}
    if isinstance(value, list | tuple):
        return [plain(one) for one in value]
    if isinstance(value, bool | str | int | None):
        return value
    number = float(value)
    return None if math.isnan(number) else "over 2 m" if math.isinf(number) else round(number, 6)


def _of_card(card: dict[str, Any]) -> dict[str, Any]:
    return {key: card[key] for key in ("name", "weights_sha256", "calibration")} | {"training": card["training"]}


def _of_rival(rival: Tuned) -> dict[str, Any]:
    log = [vars(one) for one in rival.log]
    return {"name": rival.name, "kept": rival.log[rival.best].setting, "figures": rival.figures, "log": log}


if __name__ == "__main__":
    main()
