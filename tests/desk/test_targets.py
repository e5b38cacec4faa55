"""Products: cells, limits and share rules with units, what is refused, and the target they make."""

from __future__ import annotations

from collections.abc import Iterator
from pathlib import Path

import pytest

from blendtui.desk import stocks, targets, trials
from blendtui.desk.errors import DeskError
from blendtui.desk.plant import export_plant, open_plant
from blendtui.store.errors import ChangedSince, NoSuchRow
from blendtui.store.opening import import_folder
from blendtui.store.plant import Plant
from blendtui.store.records import Trial
from solver.errors import ScaleError, TargetError
from solver.target import Limit, ShareRule


@pytest.fixture
def plant(tmp_path: Path) -> Iterator[Plant]:
    folder = tmp_path / "catalogue"
    folder.mkdir()
    (folder / "stocks.csv").write_text("stock,oil,kind,kv40,kv100\nA,LN,base,30.2,5.23\nB,LN,base,31.5,5.34\n"
                                       "M,,base,98.5,10.9\nP,,additive,,\n")
    (folder / "products.csv").write_text(
        "product,name,grade,batch_kg,law,max_cost_per_t,max_stocks,min_share_pct,only_listed,note\n"
        "H46,Hydraulic,ISO VG 46,12000,,1000,3,2.5,yes,new\nX,,,,,,,,,\n")
    (folder / "limits.csv").write_text("product,property,low,high,guard,lab\nH46,kv40,,,2%,\nH46,flash,200,,5,own\n"
                                       "H46,flash,190,,,\nX,kv100,5,6,\n".replace("5,6,\n", "5,6,,\n"))
    (folder / "shares.csv").write_text("product,of,low_pct,high_pct\nH46,P,0.85,0.85\nH46,LN,,60\nH46,M,,\n")
    import_folder(folder, tmp_path / "x.plant", who="anna")
    with open_plant(tmp_path / "x.plant", who="anna") as opened:
        yield opened


def limits(plant: Plant, product: str = "H46") -> dict[str, tuple]:
    return {x.property: (x.low, x.high, x.guard, x.guard_pct) for x in plant.product(product).limits}


def test_the_target_of_a_product(plant):
    target = targets.target_of(plant, "H46")
    assert (target.product, target.grade, target.law, target.batch_kg) == ("H46",
     "ISO VG 46", "refutas", 12000.0)
    assert (target.max_cost_per_t, target.max_stocks, target.min_share, target.only_listed) == (1000.0, 3, 0.025, True)
    assert target.rules[0] == ShareRule("P", 0.0085, 0.0085, source="share rule on P")
    assert target.limits[0] == Limit("kv40", guard_pct=2.0, source="limit on kv40")


def test_the_operator_overrides_law_and_batch_and_holds_stocks(plant):
    target = targets.target_of(plant, "H46", "wright-mass", 500.0, {"A": 0.2}, ["M"])
    assert (target.law, target.batch_kg, target.held, target.left_out) == ("wright-mass", 500.0, {"A": 0.2},
                                                                           frozenset({"M"}))


def test_what_is_not_there(plant):
    with pytest.raises(NoSuchRow, match=r"^no product 'Z'; the plant has H46, X$"):
        targets.target_of(plant, "Z")
    with pytest.raises(TargetError, match=r"^unknown law 'guess'; usable are refutas, walther-mass"):
        targets.target_of(plant, "H46", "guess")


@pytest.mark.parametrize(("cell", "typed", "value", "message"), [
    ("name", "Hydraulic 46", "Hydraulic 46", "H46 name Hydraulic → Hydraulic 46"),
    ("grade", "vg 68", "ISO VG 68", "H46 grade ISO VG 46 → ISO VG 68"),
    ("batch_kg", "15 t", 15000.0, "H46 batch 12000 → 15000"),
    ("batch_kg", "", None, "H46 batch 12000 → empty"),
    ("law", "Wright-mass", "wright-mass", "H46 law empty → wright-mass"),
    ("max_cost_per_t", "0.95 /kg", 950.0, "H46 most cost 1000 → 950"),
    ("max_stocks", "4", 4, "H46 most stocks 3 → 4"),
    ("min_share_pct", "3 %", 3.0, "H46 least share 2.5 → 3"),
    ("min_share_pct", "0.04 fraction", 4.0, "H46 least share 2.5 → 4"),
    ("only_listed", "n", False, "H46 only listed yes → no"),
    ("note", "", "", "H46 note new → empty"),
])
def test_a_cell_takes_what_is_typed(plant, cell, typed, value, message):
    before = plant.state()
    assert targets.edit_product(plant, "H46", cell, typed) == stocks.Edit("saved", message)
    assert getattr(plant.product("H46"), cell) == value
    plant.undo()
    assert plant.state() == before


@pytest.mark.parametrize("cell", [c.code for c in targets.PRODUCT_CELLS])
def test_a_cell_as_shown_may_be_typed_back(plant, cell):
    shown = targets.text_of(plant.product("H46"), cell)
    assert targets.edit_product(plant, "H46", cell, shown).status == "unchanged"
    assert plant.revision() == 1


@pytest.mark.parametrize(("cell", "typed", "message"), [
    ("law", "guess", "law 'guess' is not known; usable are refutas, walther-mass, walther-volume, wright-mass, "
                     "wright-volume"),
    ("batch_kg", "-5", "batch -5 is not above 0; check the figure, or leave it empty"),
    ("max_stocks", "2.5", "2.5 is not a whole number; write one such as 4"),
    ("min_share_pct", "120", "120 % lies outside 0 to 100 %; check the figure"),
    ("only_listed", "maybe", "'maybe' is neither yes nor no; write yes or no"),
    ("note", "a\x07", "'a␇' holds a control character: bell (U+0007); type the text again"),
    ("grade", "SAE 30", "H46 has a guard on kv40, which SAE 30 does not limit; drop that line or give it a low or a "
                        "high first"),
    ("colour", "1", "a product has no 'colour'; it has name, grade, batch_kg, law, max_cost_per_t, max_stocks, "
                    "min_share_pct, only_listed, note"),
])
def test_a_cell_refuses(plant, cell, typed, message):
    with pytest.raises(DeskError) as caught:
        targets.edit_product(plant, "H46", cell, typed)
    assert str(caught.value) == message
    assert plant.revision() == 1


def test_an_unknown_grade_lists_the_known(plant):
    with pytest.raises(DeskError, match=r"^unknown grade 'VG 47'; known are ISO VG 2, 3, 5"):
        targets.edit_product(plant, "H46", "grade", "VG 47")


def test_a_volume_is_no_batch(plant):
    with pytest.raises(ScaleError, match="is a volume: enter the density"):
        targets.edit_product(plant, "H46", "batch_kg", "5000 L")


# Limits

@pytest.mark.parametrize(("prop", "low", "high", "guard", "line", "message"), [
    ("kv40", "42", "50", "1%", (42.0, 50.0, 0.0, 1.0), "H46 kv40 low 42, high 50, guard 1%"),
    ("kv-20", "", "2000 cSt", "", (None, 2000.0, 0.0, 0.0), "H46 kv-20 high 2000"),
    ("VI", "95", "", "2", (95.0, None, 2.0, 0.0), "H46 vi low 95, guard 2"),
    ("pour", "", "10.4F", "9F", (None, -12.0, 5.0, 0.0), "H46 pour high -12, guard 5"),
    ("density15", "", "0.88 kg/L", "", (None, 880.0, 0.0, 0.0), "H46 density15 high 880"),
    ("sulfur", "", "300 ppm", "20 ppm", (None, 0.03, 0.002, 0.0), "H46 sulfur high 0.03, guard 0.002"),
    ("ccs-25", "", "70 P", "", (None, 7000.0, 0.0, 0.0), "H46 ccs-25 high 7000"),
])
def test_a_limit_is_set_with_units(plant, prop, low, high, guard, line, message):
    before = plant.state()
    assert targets.set_limit(plant, "H46", prop, low, high, guard) == stocks.Edit("saved", message)
    assert limits(plant)[prop.lower()] == pytest.approx(line)
    plant.undo()
    assert plant.state() == before


def test_a_limit_replaces_every_line_on_its_property(plant):
    before = plant.state()
    assert targets.set_limit(plant, "H46", "flash", "210").message == "H46 flash low 210; it replaces 2 lines"
    assert [x.low for x in plant.product("H46").limits if x.property == "flash"] == [210.0]
    plant.undo()
    assert plant.state() == before


def test_stocks_of_unknown_value_may_be_let_serve(plant):
    assert targets.set_limit(plant, "H46", "noack", "", "15", unknown_ok=True).message == (
        "H46 noack high 15, unknown allowed")
    targets.set_limit(plant, "H46", "noack", "", "14")
    assert plant.product("H46").limits[-1].unknown_ok


def test_the_same_limit_again_is_no_change(plant):
    assert targets.set_limit(plant, "X", "kv100", "5", "6").status == "unchanged"


def test_the_texts_of_a_line_may_be_typed_back(plant):
    for limit in plant.product("H46").limits[:1] + plant.product("X").limits:
        product = "X" if limit.property == "kv100" else "H46"
        assert targets.set_limit(plant, product, limit.property, *targets.limit_texts(limit)).status == "unchanged"


@pytest.mark.parametrize(("args", "message"), [
    (("kv40", "50", "40"), "H46 kv40: low 50 is above high 40; swap or mend them"),
    (("noack", "", "", ""), "H46 noack: neither a low nor a high nor a guard; type one, or drop the limit"),
    (("noack", "", "", "1"), "H46 noack: a guard without a limit, for its grade does not limit noack; "
                             "type a low or a high"),
    (("density15", "", "0.88"), "0.88 looks like kg/L; in kg/m³ it is 880"),
    (("kv40", "-3", ""), "-3 lies outside 0.3 to 2e+07 mm²/s; check the figure and its unit"),
    (("kv40", "42", "", "-1"), "-1 is below 0; check the figure, or leave the cell empty"),
    (("kv300", "42", ""), "kv300: the temperature must lie between −60 to 200 °C; "
                          "see the list of properties in the help"),
])
def test_a_limit_is_refused(plant, args, message):
    with pytest.raises(DeskError) as caught:
        targets.set_limit(plant, "H46", *args)
    assert str(caught.value) == message
    assert plant.revision() == 1


def test_a_limit_is_dropped_with_all_that_belongs_to_it(plant):
    before = plant.state()
    assert targets.drop_limit(plant, "H46", "flash") == "H46 limit on flash dropped"
    assert "flash" not in limits(plant)
    assert plant.state()["extra"] == {}
    plant.undo()
    assert plant.state() == before


def test_a_product_keeps_something_to_ask_for(plant):
    with pytest.raises(DeskError) as caught:
        targets.drop_limit(plant, "X", "kv100")
    assert str(caught.value) == ("the limit on kv100 is all that X asks for; give it a grade or another limit first")
    with pytest.raises(DeskError, match=r"^H46 has no limit of its own on noack; nothing to drop$"):
        targets.drop_limit(plant, "H46", "noack")
    targets.drop_limit(plant, "H46", "kv40")
    targets.drop_limit(plant, "H46", "flash")
    with pytest.raises(DeskError, match=r"^H46 has no limit of its own; set one before the grade goes$"):
        targets.edit_product(plant, "H46", "grade", "")


# Share rules

@pytest.mark.parametrize(("of", "low", "high", "pair", "message"), [
    ("A", "10", "20 %", (0.1, 0.2), "H46 A 10 to 20 %"),
    ("LN", "", "", (0.0, 1.0), "H46 LN 0 to 100 %"),
    ("group ii", "", "0.3 fraction", (0.0, 0.3), "H46 group II 0 to 30 %"),
    ("base", "50", "", (0.5, 1.0), "H46 base 50 to 100 %"),
])
def test_a_rule_is_set(plant, of, low, high, pair, message):
    before = plant.state()
    assert targets.set_rule(plant, "H46", of, low, high) == stocks.Edit("saved", message)
    found = {r.of: (r.low, r.high) for r in plant.product("H46").rules}
    assert found[message.split(" ", 1)[1].rsplit(" ", 4)[0]] == pytest.approx(pair)
    plant.undo()
    assert plant.state() == before


@pytest.mark.parametrize(("of", "low", "high", "message"), [
    ("Z", "", "", "'Z' is no stock, oil, kind or group of this plant; mend the name or add the stock"),
    ("A", "60", "50", "H46, rule on A: low 60 is above high 50; swap or mend them"),
    ("A", "70", "", "H46, rule on LN: its high 60 is below what A must have, 70 %; "
                    "raise the high or lower the other rules"),
    ("M", "99.5", "", "H46, rule on M: the lows of P, M sum to 100.35 %, more than 100 %; lower one of them"),
    ("A", "", "120", "120 % lies outside 0 to 100 %; check the figure"),
])
def test_a_rule_that_contradicts_is_refused(plant, of, low, high, message):
    with pytest.raises(DeskError) as caught:
        targets.set_rule(plant, "H46", of, low, high)
    assert str(caught.value) == message
    assert plant.revision() == 1


def test_a_rule_is_dropped(plant):
    assert targets.drop_rule(plant, "H46", "LN") == "H46 rule on LN dropped"
    with pytest.raises(DeskError, match=r"^H46 has no share rule on LN; nothing to drop$"):
        targets.drop_rule(plant, "H46", "LN")
    assert targets.set_rule(plant, "H46", "M").status == "unchanged"


# Products as a whole

def test_products_are_added_copied_and_retired(plant, tmp_path):
    before = plant.state()
    assert targets.add_product(plant, "N", "vg 32").grade == "ISO VG 32"
    copy = targets.copy_product(plant, "H46", "H46B")
    original = plant.product("H46")
    assert (copy.limits, copy.rules, copy.note) == (original.limits, original.rules, original.note)
    assert targets.retire_product(plant, "H46") == "H46 retired"
    assert [p.product for p in targets.products(plant)] == ["X", "N", "H46B"]
    export_plant(plant, tmp_path / "out")
    assert open_plant(tmp_path / "out").product("H46B") == copy
    for _ in range(3):
        plant.undo()
    assert plant.state() == before


def test_a_retired_code_is_taken_up_again_blank(plant):
    before = plant.state()
    targets.retire_product(plant, "H46")
    product = targets.add_product(plant, "H46")
    assert (product.grade, product.limits, product.rules, product.note) == ("", (), (), "")
    plant.undo()
    plant.undo()
    assert plant.state() == before


def test_a_product_code_that_is_taken(plant):
    with pytest.raises(DeskError, match=r"^there is a product X already; give the new one another code$"):
        targets.copy_product(plant, "H46", "X")


# Trials

def test_a_trial_is_kept_once_and_dropped(plant):
    trial = Trial("lean", "H46", {"A": 0.25, "M": 0.75})
    assert trials.keep_trial(plant, trial) == "H46 trial lean kept"
    (kept,) = plant.trials("H46")
    assert (kept.shares, kept.kept_by) == ({"A": 0.25, "M": 0.75}, "anna")
    with pytest.raises(DeskError, match=r"^H46 has a trial 'lean' already; keep this one under another "
                                        r"name$"):
        trials.keep_trial(plant, trial)
    assert trials.drop_trial(plant, "H46", "lean") == "H46 trial lean dropped"
    assert plant.trials() == []
    plant.undo()
    assert plant.trials() == [kept]


def test_a_trial_needs_shares_and_a_name(plant):
    with pytest.raises(DeskError, match=r"^a trial without shares; make a recipe first$"):
        trials.keep_trial(plant, Trial("x", "H46"))
    with pytest.raises(DeskError, match=r"^the trial needs a name; type one such as lean$"):
        trials.keep_trial(plant, Trial(" ", "H46", {"A": 1.0}))
    with pytest.raises(DeskError, match=r"^H46 has no trial 'gone'$"):
        trials.drop_trial(plant, "H46", "gone")


def test_a_line_that_another_changed_is_not_written_over(tmp_path: Path, plant: Plant) -> None:
    seen = plant.product("H46")
    with open_plant(plant.path, who="ben") as other:
        targets.edit_product(other, "H46", "batch_kg", "9 t")
        targets.set_limit(other, "H46", "vi", "101")
        targets.set_rule(other, "H46", "A", "1", "40")
    for change in (lambda: targets.edit_product(plant, "H46", "batch_kg", "7 t", seen=seen),
                   lambda: targets.set_limit(plant, "H46", "vi", "90", seen=seen),
                   lambda: targets.set_rule(plant, "H46", "A", "2", "30", seen=seen)):
        with pytest.raises(ChangedSince, match=r"ben changed it at .* look again and repeat the change"):
            change()
    now = plant.product("H46")
    assert now.batch_kg == 9000.0
    assert targets.edit_product(plant, "H46", "batch_kg", "7 t", seen=now).status == "saved"
