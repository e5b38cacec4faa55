"""A message that names a headless command names the key instead, and every command that a message names has one."""

from __future__ import annotations

import re
from pathlib import Path

import pytest

import blendtui.desk
from blendtui.screens.at_console import KEYS, at_console

from .conftest import started

Size = tuple[int, int]
DESK = Path(blendtui.desk.__file__).parent
NAMED = re.compile(r"blendtui (batch|stock|vessel)\s+(?:\"\s*f?\")?([a-z][a-z-]*)")


def test_every_command_that_the_desk_names_has_its_key() -> None:
    found = {f"{a} {b}" for file in DESK.glob("*.py") for a, b in NAMED.findall(file.read_text(encoding="utf-8"))}
    assert len(found) >= 4
    assert found <= set(KEYS)


@pytest.mark.parametrize(("message", "said"), [
    ("draw one: blendtui batch sample B-0001", "draw one: s on the screen Floor (Tab: laboratory)"),
    ("goes to rework (blendtui batch draw B-0001 1896 --as rework --family NAME --why TEXT); then ask",
     "goes to rework (p on the screen Floor); then ask"),
    ("the plant has none yet: blendtui vessel add NAME --set capacity_l=24000",
     "the plant has none yet: v on the screen Batches, then a"),
    ("a further one needs a reason (--why TEXT)", "a further one needs a reason"),
    ("blendtui batch replan B-0001 works out those to come", "R on the screen Floor, then y works out those to come"),
    ("plant file /data/blendtui batch.plant", "plant file /data/blendtui batch.plant"),
    ("KV40 46.60 mm²/s", "KV40 46.60 mm²/s")])
def test_a_command_is_said_as_its_key(message: str, said: str) -> None:
    assert at_console(message) == said


async def test_the_lessons_have_more_room_on_a_wide_terminal(path: Path, size: Size) -> None:
    async with started(path, size, screen="8") as driver:
        await driver.settle()
        assert driver.page.taught.size.height == (14 if size[0] >= 110 else 7)
