"""The laboratory of the floor screen: samples, results, the verdict, decisions and trims."""

from __future__ import annotations

from collections.abc import Iterator
from dataclasses import dataclass
from typing import Any

from blendtui.desk import batches, numbers
from blendtui.store.batch_records import Made, Sample
from blendtui.store.harmless import harmless
from blendtui.widgets.grid import Cell, Column, Wide
from blendtui.widgets.paint import BAD, BOLD, PLAIN

from . import reading, remedy, words
from .floor_view import Seen
from .steps import StepPage

COLUMNS = (Column("mark", "", "", 1, "left"), Column("what", "laboratory", "", 17, "left"),
           Column("low", "low", "", 7), Column("high", "high", "", 7), Column("result", "result", "", 9),
           Column("unit", "unit", "", 8, "left"), Column("says", "says", "", 24, "left"))
PAIR = ("kv40", "kv100")
RULE = ("R is the method's reproducibility. Inside a limit by 0.59 R or more: release; inside but nearer: repeat; "
        "outside by less than R: fresh sample; further outside: trim.")
SAMPLE, LIMIT, RESULT, DECISION = "sample", "limit", "result", "decision"


@dataclass(frozen=True)
class LabLine:
    """One line of the laboratory: a sample, a property with its result and limit, or a decision."""

    kind: str
    texts: tuple[str, ...]  # a column each
    property: str = ""
    told: str = ""  # in full, for the line below


def lab_lines(seen: Seen) -> list[LabLine]:
    """The newest sample with every property that is asked for, then what came before it."""
    return list(_lines(seen))


def _lines(seen: Seen) -> Iterator[LabLine]:
    made = seen.made
    if not made.samples:
        return
    newest = max(made.samples, key=lambda s: s.sample)
    yield _sample_line(newest, made)
    yield from _property_lines(seen, newest)
    for decision in reversed(made.decisions):
        of = f"{harmless(decision.by, 30)}, {batches.when(decision.at)}" + (f": {harmless(decision.why)}"
                                                                         if decision.why else "")
        full = f"{decision.decision} on sample {decision.sample}, by {of}; {harmless(decision.words, 800)}"
        yield LabLine(DECISION, ("", f"decision on {decision.sample}", decision.decision.upper()), told=full)
    for sample in sorted(made.samples, key=lambda s: -s.sample)[1:]:
        yield _sample_line(sample, made)
        for code in dict.fromkeys(r.property for r in made.results if r.sample == sample.sample):
            yield _result_line(made, sample, code)


def _sample_line(sample: Sample, made: Made) -> LabLine:
    where = ", ".join(part for part in (
        batches.when(sample.taken_at), harmless(sample.place, 20),
        f"{sample.celsius:g} °C" if sample.celsius is not None else "",
        f"by {harmless(sample.taken_by, 20)}", f"after trim {sample.round}" if sample.round else "") if part)
    return LabLine(SAMPLE, ("", f"SAMPLE {sample.sample}", where), told=harmless(f"{where} {sample.note}", 400))


def _property_lines(seen: Seen, newest: Sample) -> Iterator[LabLine]:
    """Every limit with its result, the KVs that a VI needs, and what else was measured."""
    found = [*_limit_lines(seen), *_other_lines(seen, newest)]
    first = (*PAIR, "vi")  # what belongs together stands together
    yield from sorted(found, key=lambda line: first.index(line.property) if line.property in first else len(first))


def _limit_lines(seen: Seen) -> Iterator[LabLine]:
    for limit in seen.verdict.limits if seen.verdict is not None else ():
        low, high = (numbers.value(limit.property, at) if at is not None else "" for at in (limit.low, limit.high))
        value = numbers.value(limit.property, limit.value) if limit.value is not None else ""
        sign = {"trim": "!", "fresh sample": "!", "repeat": "?", "no result": "?"}.get(limit.decision, "")
        says = limit.decision if limit.in_r is None else f"{limit.decision} ({limit.in_r:+.2f} R)"
        yield LabLine(LIMIT, (sign, words.heading(limit.property), low, high, value, words.unit(limit.property), says),
                       limit.property, limit.words)


def _other_lines(seen: Seen, newest: Sample) -> Iterator[LabLine]:
    shown = {limit.property for limit in (seen.verdict.limits if seen.verdict is not None else ())}
    own = [r.property for r in seen.made.results if r.sample == newest.sample]
    for code in dict.fromkeys([*PAIR, *own]):
        if code not in shown:
            yield _result_line(seen.made, newest, code)


def _result_line(made: Made, sample: Sample, code: str) -> LabLine:
    results = [r for r in made.results if r.sample == sample.sample and r.property == code]
    standing = [r for r in results if not r.withdrawn]
    value = ", ".join(numbers.value(code, r.value) for r in standing)
    told = "; ".join(f"{numbers.value(code, r.value)} {harmless(r.method, 30)}, {batches.when(r.at)} by "
                     f"{harmless(r.by, 30)}" + (f", withdrawn: {harmless(r.withdrawn, 200)}" if r.withdrawn else "")
                     for r in results)
    says = "withdrawn" if results and not standing else ""
    return LabLine(RESULT, ("", words.heading(code), "", "", value, words.unit(code), says), code, told)


def cell(line: LabLine, column: int) -> Cell:
    """A cell of the laboratory's table."""
    text = line.texts[column] if column < len(line.texts) else ""
    if line.kind in (SAMPLE, DECISION):
        return (Wide(text) if column == 2 else text), BOLD
    bad = line.texts[0] == "!" and column in (0, 4, 6)
    return text, BAD if bad else PLAIN


def told(lines: list[LabLine], row: int) -> tuple[str, str]:
    """What the line under the table says of a row."""
    line = lines[row] if row < len(lines) else None
    if line is None:
        return "laboratory", "no sample yet"
    return line.texts[1], line.told.removeprefix(line.texts[1]).lstrip(": ")  # not its name twice


class LabCommands(StepPage):
    """The steps of the laboratory."""

    seen: Seen | None
    lab_lines: list[LabLine]

    def go_pane(self, testing: bool) -> None:
        """Let the laboratory or the charges have the keys; the floor screen does it."""

    def _made(self) -> Made | None:
        if self.seen is None:
            self.say("there is no batch here")
            return None
        return self.seen.made

    def do_sample(self) -> None:
        """Record that a sample was taken."""
        made = self._made()
        if made is None:
            return
        plant, by = self.program.plant, self.session.by

        def make(found: list[Any], sure: bool) -> Any:
            from blendtui.desk import batch_lab

            place, at, taken = found
            return batch_lab.sample(plant, made.name, taken=taken, place=place, celsius=at, by=by, sure=sure)

        def done(sample: Sample) -> None:
            self.go_pane(True)
            self.program.say(f"sample {sample.sample} is on record; Enter on a property types its result", "done")

        self.ask_step([("sample drawn from (top, middle, bottom, line)", "", str.strip),
                       ("its temperature, °C (empty: not measured)", "", _celsius),
                       ("taken at (empty: now; 14:30; 2026-03-04 14:30)", "", str.strip)], make, done,
                      yes="it was so")

    def type_result(self) -> None:
        """Type the result of the property under the cursor."""
        made, line = self._made(), self._line()
        if made is None:
            return
        if not made.samples:
            self.refuse("no sample yet: s records one")
        elif line is None or not line.property:
            self._other_property(made)
        elif line.property == "vi":
            self.refuse("the VI follows from KV40 and KV100 of one sample: type those")
        else:
            self._type_result(made, line.property)

    def _line(self) -> LabLine | None:
        row = self.tests.row  # type: ignore[attr-defined]
        return self.lab_lines[row] if row < len(self.lab_lines) else None

    def _other_property(self, made: Made) -> None:
        self.type_checked("result of which property (kv40 kv100 flash density15 water …)", "", words.property_code,
                          lambda code: self._type_result(made, code))

    def _type_result(self, made: Made, code: str) -> None:
        plant, by = self.program.plant, self.session.by
        sample = max(s.sample for s in made.samples)
        unit = words.unit(code)

        def make(typed: str, sure: bool) -> Any:
            from blendtui.desk import batch_lab

            return batch_lab.results(plant, made.name, sample, {code: typed}, by=by, sure=sure)

        self.type_step(f"sample {sample} {words.heading(code)}{', ' + unit if unit else ''}", "", make,
                       self._say_verdict, yes="it was so")

    def _say_verdict(self, verdict: Any) -> None:
        self.program.say(harmless(f"{verdict.headline}; v shows the arithmetic", 1000), "done")

    def withdraw_result(self) -> None:
        """Withdraw the newest standing result of the property under the cursor."""
        made, line = self._made(), self._line()
        if made is None:
            return
        sample = max((s.sample for s in made.samples), default=0)
        standing = [r for r in made.results if line and r.sample == sample and r.property == line.property
                    and not r.withdrawn]
        if not standing:
            self.say("the cursor is on no result of the last sample that could be withdrawn")
            return
        plant, by, result = self.program.plant, self.session.by, standing[-1]

        def make(why: str, sure: bool) -> Any:
            from blendtui.desk import batch_lab

            return batch_lab.withdraw(plant, made.name, sample, result.line, why=why, by=by)

        told = f"{words.heading(result.property)} {numbers.value(result.property, result.value)}"
        self.type_why(f"{told} of sample {sample} is withdrawn", make,
                      lambda done: self.program.say(f"{told} withdrawn; it stays on record", "done"), yes="withdraw it")

    def do_verdict(self) -> None:
        """Show the verdict with its arithmetic."""
        if self.seen is None or self.seen.verdict is None:
            self.say("there is no sample to judge yet")
            return
        verdict = self.seen.verdict
        text = [harmless(verdict.headline, 400), "", *(harmless(each, 600) for each in verdict.words), "", RULE]
        self.app.push_screen(reading.ReadingScreen(f"{self.seen.name}: what the results say", text))

    def do_decide(self) -> None:
        """Decide on the last sample."""
        made = self._made()
        if made is None or self.seen is None:
            return
        if self.seen.verdict is None:
            self.say("there is no sample to decide on yet; s records one")
            return
        plant, by, says = self.program.plant, self.session.by, self.seen.verdict.decision

        def then(typed: str) -> None:
            decision = "" if typed == says else typed
            if decision:
                self.type_why(f"{decision}, where the results say {says}",
                              lambda why, sure: _decide(plant, made.name, decision, why, by), self._say_decided)
            else:
                self.take_step(lambda sure: _decide(plant, made.name, "", "", by), self._say_decided)

        self.type_checked(f"decision (release, repeat, fresh sample, trim; the results say {says})",
                          "" if says == "no result" else says, _decision, then)

    def _say_decided(self, decision: Any) -> None:
        self.program.say(f"{decision.decision} decided on sample {decision.sample}", "done")

    def do_trim(self) -> None:
        """Show the trim, and plan it when told so."""
        made = self._made()
        if made is not None:
            remedy.show_trim(self, made)


def _decide(plant: Any, name: str, decision: str, why: str, by: str) -> Any:
    from blendtui.desk import batch_lab

    return batch_lab.decide(plant, name, decision=decision, why=why, by=by)


def _decision(typed: str) -> str:
    from blendtui.desk.batch_verdict import DECISIONS
    from blendtui.desk.errors import DeskError

    text = " ".join(typed.lower().split())
    able = [d for d in DECISIONS if text and d.startswith(text)]
    exact = [d for d in able if d == text] or able
    if len(exact) != 1:
        raise DeskError(f"{harmless(typed, 40)!r} is no decision; there are {', '.join(DECISIONS)}")
    return exact[0]


def _celsius(typed: str) -> float | None:
    from solver.scales import parse

    return parse(typed, "temperature") if typed.strip() else None
