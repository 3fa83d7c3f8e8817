"""What is in a litre of spray: strength of the product, of the mix, and the mix's density."""

from __future__ import annotations

from schorl.errors import UsageProblem
from schorl.findings import Finding, finding
from schorl.machinery.solids import dissolved_solid, solution_density_kg_l
from schorl.model.settings import Product


def missing_share(what: str) -> Finding:
    """The finding for a product whose boron is not stated as a dose."""
    return finding(
        "MACHINE-SHARE",
        where="product",
        what=what,
        hint="give `--boron-pct` for a granule; `boron_g_l`, or `boron_pct` with `density_kg_l`, "
        "for a liquid; `boron_pct` with `compound` for a powder that is dissolved",
    )


def strength_g_l(product: Product) -> float | None:
    """Grams of boron in a litre of a liquid product; None for a solid that is dissolved.

    Raises
    ------
    UsageProblem
        A bare per cent of a liquid, or nothing (exit 2): 150 g/L is about 11 % by weight.
    """
    if product.boron_g_l is not None:
        return product.boron_g_l
    if product.boron_pct is not None and product.density_kg_l is not None:
        return product.boron_pct * 10.0 * product.density_kg_l
    if product.boron_pct is None:
        raise UsageProblem([missing_share("the boron of a spray is not given")])
    if dissolved_solid(product) is not None:
        return None
    what = f"{product.boron_pct:g} % of a liquid without its density is not a dose"
    raise UsageProblem([missing_share(what)])


def product_per_litre(product: Product, mix_g_b_l: float) -> float:
    """Litres of liquid product, or kg of solid, in a litre of mix.

    Raises
    ------
    UsageProblem
        The mix would be stronger than the product itself (exit 2).
    """
    strength = strength_g_l(product)
    if strength is None:
        return mix_g_b_l / (10.0 * (product.boron_pct or 0.0))
    share = mix_g_b_l / strength
    if share > 1.0 + 1e-9:
        what = f"a mix of {mix_g_b_l:g} g B/L from a product of {strength:g} g B/L"
        raise UsageProblem([finding("MACHINE-MIX-STRONG", where="machine", what=what)])
    return min(share, 1.0)


def mix_density_kg_l(product: Product, mix_g_b_l: float) -> float:
    """Density of the mix, volumes taken as adding up; that of water where a liquid has none.

    Only the product's own share counts, so what is sprayed undiluted has the product's density.
    """
    amount = product_per_litre(product, mix_g_b_l)
    solid = dissolved_solid(product)
    if solid is not None:
        return solution_density_kg_l(solid, 1000.0 * amount)
    if product.density_kg_l is None:
        return 1.0
    return 1.0 + amount * (product.density_kg_l - 1.0)
