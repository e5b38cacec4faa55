"""How sure the prediction is: headless."""

from __future__ import annotations

import argparse

from blendtui.quiet import quiet

from .common import DONE, NO_BLEND, Add, BadInput, number, opened, say, shares_of, show

WIDTH = 80  # columns of a printer


def register(add: Add) -> None:
    """Add the command `chance`."""
    command = add("chance", _chance, "how likely the first batch is on grade: of the least-cost recipe, or of given "
                  "shares")
    command.add_argument("product", metavar="PRODUCT")
    command.add_argument("shares", nargs="*", metavar="STOCK=PCT", help="shares that sum to 100; without: the recipe's")
    command.add_argument("--batch", metavar="KG", help="batch size, kg (or 12 t): weighing follows the scale divisions")
    command.add_argument("--law", help="the blending law, over the product's own")
    command.add_argument("--seed", metavar="N", help="of the drawn blends, 1 by default: one seed, one answer")
    command.add_argument("--blends", metavar="N", help="how many blends are drawn, 100000 by default")


def _chance(options: argparse.Namespace) -> int:
    from blendtui.desk import blends, chance, chance_words
    from blendtui.desk.law_error import law_sigma
    from blendtui.desk.sheet import NOT_A_CERTIFICATE
    from blendtui.desk.targets import target_of
    from blendtui.store.harmless import harmless

    batch = None if options.batch is None else number(options.batch, "--batch", "mass")
    if batch is not None and batch <= 0.0:
        raise BadInput(f"--batch {options.batch}: a batch is more than 0 kg")
    seed = _whole(options.seed, "--seed", chance.SEED, 0, 2 ** 63 - 1)
    count = _whole(options.blends, "--blends", chance.BLENDS, 1, 5_000_000)
    shares = shares_of(options.shares)
    with opened(options) as plant:
        stocks = plant.stocks()
        target = target_of(plant, options.product, options.law, batch)
        sigma = law_sigma(plant, target.law, target.product)
    say(f"drawing {count} blends of {options.product} …")
    with quiet():
        recipe = None if shares else blends.best(stocks, target, time_limit=30.0)
        made = shares if recipe is None else recipe.shares
        found = None
        if made:
            *_, found = chance.report(stocks, target, made, sigma, blends=count, seed=seed)
    feasible = recipe is None or recipe.status != "infeasible"
    if found is None:
        show(options, _nothing(options.product, target.law, seed, count, target.batch_kg, tuple(recipe.reasons)),
             f"{harmless(options.product)}: no blend to speak of: {'; '.join(recipe.reasons)}")
        return NO_BLEND
    of = ("given shares" if recipe is None else "the least-cost recipe" if feasible
          else "NO BLEND meets every limit; this is the nearest")
    head = f"{harmless(options.product)}, {of}: mass % " + ", ".join(
        f"{harmless(code)} {100.0 * share:.2f}" for code, share in found.chances.shares.items())
    words = [line for _, line in [*chance_words.wrapped("", head, WIDTH), ("", ""), *chance_words.lines(found, WIDTH)]]
    show(options, chance.report_json(options.product, found), "\n".join([*words, "", NOT_A_CERTIFICATE]))
    return DONE if feasible else NO_BLEND


def _nothing(product: str, law: str, seed: int, count: int, batch: float | None,
             notes: tuple[str, ...]) -> dict[str, object]:
    """The answer where not even a nearest blend exists."""
    return {"product": product, "law": law, "shares_pct": None, "batch_kg": batch, "seed": seed, "blends": count,
            "law_error_from": None, "limits": [], "all": {"chance": None, "error": None, "closed": None}, "budget": {},
            "test_next": None, "law_next": None, "notes": list(notes)}


def _whole(text: str | None, option: str, usual: int, least: int, most: int) -> int:
    if text is None:
        return usual
    if not (text.isascii() and text.isdigit() and least <= int(text) <= most):
        raise BadInput(f"{option} {text}: give a whole number from {least} to {most}")
    return int(text)
