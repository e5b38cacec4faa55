"""The floor screen: a batch is charged, checked, tested, trimmed, released and packed by keyboard alone."""

from __future__ import annotations

from pathlib import Path

import pytest

from blendtui.desk import batch_lab, charging
from blendtui.desk.plant import open_plant
from blendtui.screens import floor_view

from .conftest import Driver, started
from .floor_case import HEAVY, LIGHT, PACK, planned, with_batch

Size = tuple[int, int]


@pytest.fixture
def path(path: Path) -> Path:
    """The small plant with a kettle and a planned batch."""
    with_batch(path)
    return path


async def charged(driver: Driver) -> None:
    """Charge all three lines as planned, and have ben check them."""
    for kg in (LIGHT, HEAVY, PACK):
        await driver.press("enter")
        await driver.type(f"{kg:g}")
    await driver.press("ctrl+home")
    for _ in range(3):
        await driver.press("c")
        await driver.type("ben")
        await driver.press("down")


async def sampled(driver: Driver, **results: str) -> None:
    """Take a sample, and type results into its properties."""
    await driver.press("s")
    for text in ("top", "58", ""):
        await driver.type(text)
    for code, text in results.items():
        await on_property(driver, code)
        await driver.press("enter")
        await driver.type(text)


async def sure(driver: Driver) -> None:
    """Answer a question with yes, if one is open."""
    if driver.page.edit.active:
        await driver.press("y")


async def on_property(driver: Driver, code: str) -> None:
    """Put the cursor of the laboratory on a property."""
    rows = [line.property for line in driver.page.lab_lines]
    at, to = driver.page.tests.row, rows.index(code)
    driver.send(*["down" if to > at else "up"] * abs(to - at))
    await driver.settle()


async def test_the_batch_stands_with_its_next_step_in_a_sentence(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        head = driver.page.head.text()
        assert head.startswith("B-0001: H46, 15000 kg in K1: planned; for Northern Presses, 4711")
        assert "next: charge 8950 kg of LIGHT, lot L-17, until the scale shows 9100 kg" in head
        rows = [line.split() for line in driver.page.charges.text().splitlines()[2:5]]
        assert rows[0][:7] == ["▸", "1", "LIGHT", "8950", "45", "L-17", "9100"]
        assert rows[1][:6] == ["2", "HEAVY", "5780", "30", "H-4", "14880"]
        assert rows[2][:6] == ["3", "PACK", "120", "0.5", "P-9", "15000"]
        assert "site procedure decides" in driver.page.caution.text()
        for line in driver.text().splitlines():
            assert len(line) <= size[0]


async def test_charges_are_typed_one_after_another_and_the_cursor_goes_on(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("8.95 t")
        assert driver.status == "line 1, LIGHT: 8950 kg charged, 8950 kg planned"
        assert driver.page.charges.row == 1
        assert "until the scale shows 14880 kg" in driver.page.head.text()
        done = driver.plant.batch("B-0001").charges[0]
        assert (done.actual_kg, done.by, done.actual_lot) == (LIGHT, "anna", "L-17")
        assert driver.plant.stock("LIGHT").on_hand_kg == 60000.0 - LIGHT


async def test_a_charge_outside_its_tolerance_is_said_at_once_and_put_right(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("9200")
        assert driver.status.startswith("OUTSIDE TOLERANCE: line 1, LIGHT: 9200 kg charged, 8950 kg planned")
        assert "KV40 46.81 → 46.45 mm²/s" in driver.status
        assert "HEAVY 5780 → 5530 kg" in driver.status
        assert driver.page.status.text().startswith("! OUTSIDE TOLERANCE")
        assert driver.page.charges.text().splitlines()[2].startswith("! 1")
        await driver.press("R")
        shown = driver.app.screen.page_text.text()
        assert "HEAVY 5780 → 5530 kg" in shown
        assert driver.plant.batch("B-0001").charges[1].plan_kg == HEAVY
        await driver.press("y")
        assert driver.plant.batch("B-0001").charges[1].plan_kg == pytest.approx(5530.0)
        assert "planned anew" in driver.status


async def test_ten_times_the_plan_is_asked_about_and_enter_alone_does_not_do_it(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("89500")
        assert "89500 kg is 10 times the planned 8950 kg" in driver.status
        assert "y: it was so" in driver.status
        assert driver.page.status.text().startswith("? ")
        await driver.press("enter")
        assert driver.plant.batch("B-0001").charges[0].actual_kg is None
        await driver.press("escape")
        assert driver.plant.batch("B-0001").charges[0].actual_kg is None


async def test_what_is_questioned_is_done_with_y(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await driver.press("enter")
        await driver.type("89500")
        await driver.press("y")
        assert driver.plant.batch("B-0001").charges[0].actual_kg == 89500.0


async def test_a_negative_charge_is_refused_and_stays_on_the_line(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("-20")
        assert "cannot have been charged" in driver.status
        assert driver.page.edit.typing.text == "-20"
        assert driver.plant.batch("B-0001").charges[0].state == "planned"


async def test_a_lot_that_is_not_in_the_tank_is_asked_about(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("l")
        assert "in the tank: L-17" in driver.text()
        await driver.type("L-99")
        await driver.type("8950")
        assert "lot L-99 is not in LIGHT, which holds L-17" in driver.status
        await driver.press("y")
        assert driver.plant.batch("B-0001").charges[0].actual_lot == "L-99"
        assert "L-99" in driver.page.charges.text()
        assert "L-99 is recorded as typed" in driver.status


async def test_the_second_check_is_by_another_person(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("8950")
        await driver.press("up", "c")
        await driver.type("Anna")
        assert "the second check is by another person" in driver.status
        await driver.press("escape", "c")
        await driver.type("ben")
        assert driver.plant.batch("B-0001").charges[0].checked_by == "ben"
        assert "ben" in driver.page.charges.text()


async def test_a_missed_line_needs_its_reason_and_may_still_be_charged(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("down", "down", "x")
        await driver.type("")
        assert "a reason is needed here" in driver.status
        await driver.type("drum is empty")
        assert driver.plant.batch("B-0001").charges[2].state == "dropped"
        assert "120 kg are not charged" in driver.status
        assert "missed" in driver.page.charges.text()
        await driver.press("down", "down", "enter")
        await driver.type("120")
        assert "was dropped" in driver.status
        await driver.press("y")
        assert driver.plant.batch("B-0001").charges[2].actual_kg == 120.0


async def test_a_correction_asks_why_and_the_check_is_due_again(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await charged(driver)
        await driver.press("ctrl+home", "e")
        await driver.type("8955")
        await driver.type("read off the wrong line")
        done = driver.plant.batch("B-0001").charges[0]
        assert (done.actual_kg, done.checked_by) == (8955.0, "")
        assert "read off the wrong line" in done.why
        assert driver.plant.stock("LIGHT").on_hand_kg == 60000.0 - 8955.0


async def test_one_undoes_ones_own_last_step(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("enter")
        await driver.type("8950")
        await driver.press("u")
        assert driver.status.startswith("undone: B-0001 line 1")
        assert driver.plant.batch("B-0001").charges[0].state == "planned"
        assert driver.plant.stock("LIGHT").on_hand_kg == 60000.0
        assert "planned" in driver.page.head.text()


async def test_steps_are_recorded_under_a_typed_name(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await driver.press("b")
        await driver.type("Dora")
        await driver.press("enter")
        await driver.type("8950")
        assert driver.plant.batch("B-0001").charges[0].by == "Dora"


async def test_keys_that_have_no_meaning_in_a_state_say_why(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        for key, said in (("c", "is not charged yet"), ("e", "is not charged yet"), ("d", "no sample to decide on"),
                          ("v", "no sample to judge"), ("t", "is still being charged")):
            await driver.press(key)
            assert said in driver.page.status.message, key
        await driver.press("enter")
        await driver.type("8950")
        await driver.press("up", "enter")
        assert "is charged by anna already; e corrects it" in driver.page.status.message
        await driver.press("9")
        assert driver.app.current_mode == "floor"


async def test_the_laboratory_shows_the_verdict_of_every_limit_with_its_arithmetic(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="46.6")
        assert "no release while VI" in driver.status
        assert "still without a result" in driver.page.head.text()
        await sampled_more(driver, kv100="6.88", flash="222")
        text = driver.page.tests.text()
        assert "release (+6.48 R)" in text
        assert "VI" in text
        await driver.press("v")
        assert "KV40 46.60 mm²/s, high 50.60: inside by 4.00 = 6.48 R" in driver.app.screen.page_text.text()
        await driver.press("escape", "d")
        await driver.type("release")
        assert driver.plant.batch("B-0001").decisions[-1].decision == "release"


async def sampled_more(driver: Driver, **results: str) -> None:
    """Type more results of the sample that is there."""
    for code, text in results.items():
        await on_property(driver, code)
        await driver.press("enter")
        await driver.type(text)


async def test_another_decision_than_the_results_asks_why(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="46.6", kv100="6.88", flash="222")
        await driver.press("d")
        await driver.type("trim")
        assert "why trim, where the results say release" in driver.text()
        await driver.type("customer wants it thicker")
        assert driver.plant.batch("B-0001").decisions[-1].why == "customer wants it thicker"


async def test_a_result_is_withdrawn_with_its_reason_and_stays(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="46.6")
        await driver.press("e")
        await driver.type("bath was cold")
        result = driver.plant.batch("B-0001").results[0]
        assert (result.value, "bath was cold" in result.withdrawn) == (46.6, True)


async def test_swapped_viscosities_are_refused(path: Path) -> None:
    async with started(path, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="46.6")
        await on_property(driver, "kv100")
        await driver.press("enter")
        await driver.type("68.8")
        assert "swapped" in driver.status
        assert len(driver.plant.batch("B-0001").results) == 1


async def test_release_names_what_is_missing_then_asks_for_the_name(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("L")
        assert "missing:" in driver.app.screen.page_text.text()
        await driver.press("escape")
        await charged(driver)
        await sampled(driver, kv40="46.6", kv100="6.88", flash="222")
        await driver.press("d")
        await driver.type("release")
        assert "L releases it" in driver.page.head.text()
        await driver.press("L")
        await driver.type("ines")
        assert "y: release it" in driver.status
        await driver.press("y")
        made = driver.plant.batch("B-0001")
        assert (made.head.state, made.head.closed_by) == ("released", "ines")
        assert "released" in driver.page.head.text()
        await driver.press("p")
        await driver.type("packed")
        await driver.type("14800")
        assert driver.plant.batch("B-0001").outcomes[-1].kg == 14800.0
        await driver.press("w")
        await driver.type("certificate")
        await driver.press("enter")
        written = (path.parent / "B-0001-certificate.txt").read_text()
        assert "46.60" in written
        assert str(path.parent / "B-0001-certificate.txt") in driver.status
        assert driver.plant.verify() is None


async def test_a_trim_is_shown_and_planned_only_when_taken(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="40.0")
        await sure(driver)
        await sampled_more(driver, kv100="6.25", flash="222")
        await driver.press("d")
        await driver.type("trim")
        await driver.press("t")
        shown = driver.app.screen.page_text.text()
        assert "trim 1 (least cost), from sample 1: add" in " ".join(shown.split())
        assert "BRIGHT" in shown
        assert all(c.round == 0 for c in driver.plant.batch("B-0001").charges)
        await driver.press("y")
        added = [c for c in driver.plant.batch("B-0001").charges if c.round == 1]
        assert added
        assert "trim 1 is planned" in driver.status
        assert f"next: trim 1, charge {floor_view.kg(added[0].plan_kg, 5.0)} kg of {added[0].stock}" in (
            driver.page.head.text())


async def test_a_trim_too_many_asks_for_its_reason(path: Path, monkeypatch: pytest.MonkeyPatch) -> None:
    from blendtui.desk import release

    monkeypatch.setattr(release, "FREE_ROUNDS", 0)
    async with started(path, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="40.0")
        await sure(driver)
        await sampled_more(driver, kv100="6.25", flash="222")
        await driver.press("d")
        await driver.type("trim")
        await driver.press("t", "y")
        assert "why a trim 1 is made" in driver.text()
        await driver.type("formulator was asked")
        added = [c for c in driver.plant.batch("B-0001").charges if c.round == 1]
        assert added
        assert {c.why for c in added} == {"formulator was asked"}


async def test_too_small_a_kettle_says_what_to_draw_off_first(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        from blendtui.desk import vessels

        vessels.set_cell(plant, "K1", "capacity_l", "19700")
    async with started(path, screen="0") as driver:
        await charged(driver)
        await sampled(driver, kv40="40.0")
        await sure(driver)
        await sampled_more(driver, kv100="6.25", flash="222")
        await driver.press("d")
        await driver.type("trim")
        await driver.press("t")
        assert driver.app.screen.page_text.text().startswith("! draw off")
        assert "y plan this trim" not in driver.app.screen.keys.text()
        await driver.press("escape", "p")
        await driver.type("rework")
        for text in ("600", "", "H46", "no room for the trim"):
            await driver.type(text)
        out = driver.plant.batch("B-0001").outcomes[0]
        assert (out.what, out.kg) == ("rework", 600.0)
        assert out.stock in [s.code for s in driver.plant.stocks()]


async def test_cautions_are_a_key_away_and_never_a_clearance(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        await driver.press("k")
        text = " ".join(driver.app.screen.page_text.text().split())
        assert "none is a permission" in text
        assert not {"safe", "cleared", "permitted", "allowed"} & set(text.lower().replace(",", " ").split())


async def test_tab_goes_between_the_panes_and_both_stand_on_a_wide_terminal(path: Path, size: Size) -> None:
    async with started(path, size, screen="0") as driver:
        both = size[0] >= 110
        assert driver.page.charges.display
        assert driver.page.tests.display is both
        await driver.press("tab")
        assert driver.page.tests.display
        assert driver.page.charges.display is both
        await driver.press("enter")
        assert "no sample yet: s records one" in driver.page.status.message


async def test_without_a_batch_the_floor_says_where_one_is_ordered(made_once: Path, tmp_path: Path, size: Size) -> None:
    import shutil

    bare = Path(shutil.copy(made_once, tmp_path / "bare.plant"))
    async with started(bare, size, screen="0") as driver:
        assert "on the screen Batches, a takes an order" in driver.text()
        await driver.press("enter", *"lcxeRsvdtpLwkn", "tab", "enter")
        assert driver.app.current_mode == "floor"
        assert driver.app.is_running


async def test_the_next_open_batch_is_a_key_away(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        planned(plant, "B-0002")
    async with started(path, screen="0") as driver:
        first = driver.app.session.batch
        await driver.press("n")
        assert driver.app.session.batch != first
        await driver.press("n")
        assert driver.app.session.batch == first


async def test_a_late_sample_and_result_of_another_are_picked_up(path: Path) -> None:
    with open_plant(path, who="carla") as plant:
        for line, kg in enumerate((LIGHT, HEAVY, PACK), 1):
            charging.charge(plant, "B-0001", line, kg)
    async with started(path, screen="0") as driver:
        batch_lab.sample(driver.plant, "B-0001", place="top", celsius=58.0)
        driver.app._poll()
        await driver.settle()
        assert "ben changed the plant" in driver.status
        assert any("SAMPLE 1" in line.texts[1] for line in driver.page.lab_lines)


def test_masses_are_shown_to_the_division_of_what_weighs_them() -> None:
    assert [floor_view.kg(1234.5, d) for d in (0.5, 0.05, None)] == ["1234.5", "1234.50", "1234.5"]
    assert floor_view.kg(1234.56, 10.0) == "1234.56"  # a mass between the steps is not hidden
