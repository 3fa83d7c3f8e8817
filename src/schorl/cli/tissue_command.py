"""`schorl tissue`: leaf and brix checks in season, and the foliar pass they warrant."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, folder_part, run_command, with_manner
from schorl.cli.options import product_said, with_product

FILE = click.Path(path_type=Path)
EPILOG = """\b
Columns: zone (or longitude, latitude), leaf boron (mg/kg), young leaf boron (mg/kg),
old leaf boron (mg/kg), brix evening, brix morning; any of them may be left out.

\b
Examples:
  schorl tissue packs/Marl-Pit-2026 leaves.csv --range "alfalfa top" --boron-g-l 150
  schorl tissue packs/Long-Acre-2026 leaves.csv --boron-g-l 150 \\
      --deficient-below 25 --sufficient-from 35 --by "A. Adviser"
"""


@click.command("tissue", epilog=EPILOG, short_help="Is a foliar pass warranted, and where?")
@click.argument("pack", type=FILE)
@click.argument("leaves", type=FILE)
@click.option("--range", "range_row", type=str, help="Row of `schorl tables tissue` to hold to.")
@click.option("--deficient-below", type=click.FloatRange(1, 300), help="Own range, mg/kg.")
@click.option("--sufficient-from", type=click.FloatRange(1, 300), help="Own range, mg/kg.")
@click.option("--toxic-above", type=click.FloatRange(10, 2000), help="Own range, mg/kg.")
@click.option("--by", type=str, default="", help="Person who answers for an own range.")
@click.option("--dose-kg-ha", type=click.FloatRange(0, min_open=True), help="Boron of the pass.")
@with_product
@click.option("--season", type=str, help="Name of the pass [SEASON-leaves].")
@click.option("--out", type=FILE, default=None, help="Folder the pass's pack is written into.")
@click.option("--replace", is_flag=True, help="Put the new pack in the place of an older one.")
@with_manner
def command(
    pack: Path, leaves: Path, as_json: bool, quiet: bool, verbose: int, **given: Any
) -> None:
    """Judge the zones of PACK by the checks in LEAVES.

    Leaf boron against a published range decides; the gap between young and old leaves and brix
    overnight only tip what is marginal. A pass is held to the foliar cap and to what the season's
    limits leave after the pack. Where none is warranted, nothing is written.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)

    def work() -> Answer:
        from schorl.formats.writing import safe_name
        from schorl.model.summary import plain_fields, summary
        from schorl.report.words import closing_table, leaf_table
        from schorl.run.prescribing import pack_name, write_record
        from schorl.run.tissue import LeafWanted, tissue_answer

        answer = tissue_answer(pack, leaves, _wanted(LeafWanted, given))
        rows = [plain_fields(one) for one in answer.zones]
        result: dict[str, Any] = {"leaf_checks": rows, "pack": None}
        text = leaf_table(answer.zones)
        if answer.record is not None:
            target = (given["out"] or pack.resolve().parent) / safe_name(pack_name(answer.record))
            written = write_record(
                answer.record, target, replace_old=given["replace"], progress=manner.progress
            )
            result = summary(answer.record) | {"pack": folder_part(written.folder, written.files)}
            text += f"\n\n{closing_table(answer.record)}\npack: {written.folder}"
        return Answer(result=result, text=text, findings=answer.findings)

    run_command("tissue", manner, work)


def _wanted(kind: Any, given: dict[str, Any]) -> Any:
    return kind(
        product=product_said(given),
        machine_file=given["machine"], range_row=given["range_row"],
        deficient_below=given["deficient_below"], sufficient_from=given["sufficient_from"],
        toxic_above=given["toxic_above"], by=given["by"], dose_kg_ha=given["dose_kg_ha"],
        season=given["season"],
    )  # fmt: skip
