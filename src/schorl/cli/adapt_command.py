"""`schorl adapt`: the same boron through another product, machine or controller."""

from __future__ import annotations

from pathlib import Path
from typing import Any

import click

from schorl.cli.frame import Answer, Manner, run_command, with_manner

FILE = click.Path(path_type=Path)
EPILOG = """\b
Examples:
  schorl adapt packs/Long-Acre-2026 --boron-pct 15 --out packs
  schorl adapt packs/Long-Acre-2026 --machine sprayer.toml --form spray --boron-g-l 150
  schorl adapt packs/Long-Acre-2026 --profile us-rate-shapefile --keep-off ditch.geojson
"""


@click.command("adapt", epilog=EPILOG, short_help="Same boron, other product, machine, controller.")
@click.argument("pack", type=FILE)
@click.option("--machine", type=FILE, help="TOML file with a job's [machine], and [product].")
@click.option("--form", type=click.Choice(["granule", "spray"]), help="What leaves the machine.")
@click.option("--boron-pct", type=float, help="Boron in the product, % by weight.")
@click.option("--boron-g-l", type=float, help="Boron in a liquid product, g/L.")
@click.option("--density-kg-l", type=float, help="Density of a liquid product.")
@click.option("--product-name", type=str, help="Name of the product, for the sheet.")
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

        named = {
            "form": given["form"], "boron_pct": given["boron_pct"],
            "boron_g_l": given["boron_g_l"], "density_kg_l": given["density_kg_l"],
            "name": given["product_name"],
        }  # fmt: skip
        wanted = Wanted(
            machine_file=given["machine"],
            product={key: value for key, value in named.items() if value is not None},
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
        files = [{"path": path, "bytes": size, "sha256": sha} for path, size, sha in written.files]
        result = summary(record) | {"pack": {"folder": str(written.folder), "files": files}}
        text = closing_table(record) + f"\npack: {written.folder}"
        return Answer(result=result, text=text, findings=record.findings)

    run_command("adapt", manner, work)
