"""`schorl adapt`: the same boron through another product, machine or controller."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, folder_part, run_command, with_manner
from schorl.cli.options import product_said, with_product

FILE = click.Path(path_type=Path)
EPILOG = """\b
Examples:
  schorl adapt packs/Long-Acre-2026 --boron-pct 15 --out packs
  schorl adapt packs/Long-Acre-2026 --machine sprayer.toml --form spray --boron-g-l 150
  schorl adapt packs/Long-Acre-2026 --profile us-rate-shapefile --keep-off ditch.geojson
"""


@click.command("adapt", epilog=EPILOG, short_help="Same boron, other product, machine, controller.")
@click.argument("pack", type=FILE)
@with_product
@click.option("--form", type=click.Choice(["granule", "spray"]), help="What leaves the machine.")
@click.option("--profile", type=str, help="What the controller takes: a name, or a TOML file.")
@click.option("--keep-off", type=FILE, help="More areas that must not be treated.")
@click.option("--keep-off-m", type=click.FloatRange(0), default=0.0, help="Untreated strip inside.")
@click.option("--out", type=FILE, default=None, help="Folder the new pack is written into.")
@click.option("--name", type=str, default=None, help="Name of the new pack [PACK-adapted].")
@click.option("--replace", is_flag=True, help="Put the new pack in the place of an older one.")
@with_manner
def command(pack: Path, as_json: bool, quiet: bool, verbose: int, **given: Any) -> None:
    """Adapt a pack: agronomy is not done again, and no zone gets more boron than it had.

    Zones get less where the new machine cannot give as much or throws less evenly; what is lost is
    told zone by zone. The new pack records the one it came from.
    """
    manner = Manner(as_json=as_json, quiet=quiet, verbose=verbose)

    def work() -> Answer:
        from schorl.formats.writing import safe_name
        from schorl.model.summary import summary
        from schorl.report.words import closing_table
        from schorl.run.adapting import Wanted, adapt_pack
        from schorl.run.prescribing import write_record

        wanted = Wanted(
            machine_file=given["machine"],
            product=product_said(given),
            profile=given["profile"],
            keep_off=given["keep_off"],
            keep_off_m=given["keep_off_m"],
        )
        record = adapt_pack(pack, wanted)
        name = safe_name(given["name"] or f"{pack.resolve().name}-adapted")
        target = (given["out"] or pack.resolve().parent) / name
        written = write_record(
            record, target, replace_old=given["replace"], progress=manner.progress
        )
        result = summary(record) | {"pack": folder_part(written.folder, written.files)}
        text = closing_table(record) + f"\npack: {written.folder}"
        return Answer(result=result, text=text, findings=record.findings)

    run_command("adapt", manner, work)
