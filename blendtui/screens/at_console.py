"""What a message says to do headless, said as the key that does it at the console."""

from __future__ import annotations

import re

BATCHES, FLOOR, LAB, STOCKS = (f"on the screen {name}" for name in ("Batches", "Floor", "Floor (Tab: laboratory)",
                                                                   "Stocks"))
KEYS = {  # headless command → the key
    "batch order": f"a {BATCHES}", "batch list": "9, the screen Batches", "batch show": f"Enter {BATCHES}",
    "batch card": f"w {BATCHES}", "batch redesign": f"n {BATCHES}", "batch cancel": f"d {BATCHES}",
    "batch charge": f"Enter {FLOOR}", "batch correct": f"e {FLOOR}", "batch check": f"c {FLOOR}",
    "batch miss": f"x {FLOOR}", "batch outlook": f"R {FLOOR}", "batch replan": f"R {FLOOR}, then y",
    "batch sample": f"s {LAB}", "batch result": f"Enter {LAB}", "batch withdraw-result": f"e {LAB}",
    "batch decide": f"d {LAB}", "batch trim": f"t {LAB}", "batch release": f"L {FLOOR}",
    "batch certificate": f"w {FLOOR}", "batch pack": f"p {FLOOR}", "batch draw": f"p {FLOOR}",
    "batch balance": f"p {FLOOR}", "stock receive": f"i {STOCKS}", "stock test": f"o {STOCKS}",
    "stock dip": f"p {STOCKS}", "stock book": f"b {STOCKS}", "vessel add": f"v {BATCHES}, then a",
    "vessel set": f"v {BATCHES}, then Enter", "vessel retire": f"v {BATCHES}, then d", "vessel list": f"v {BATCHES}"}
# A word of the command's own: an option with what follows it, capitals, a name or number with a digit, CELL=VALUE.
OWN = r"(?: (?:--[a-z-]+(?: (?:[A-Z]+\b|rework|slops|cost|mass))?|\w+=\w+|[\w.+-]*\d[\w.+-]*(?<!\.)|[A-Z]+\b))*"
COMMAND = re.compile(rf"blendtui (batch|stock|vessel)\s([a-z][a-z-]*)({OWN})")
PHRASES = {  # what the desk leaves open, because headless it is another command
    "type it with the charge, or correct the line with the same kg": 
    "on its line e with the same kg asks for it",
    "receive it or type it as a correction of the charge": 
    f"on its line l {FLOOR} types it"}
OPTION = re.compile(r"\s*\(--(?:why TEXT|sure|by NAME)\)")


def at_console(message: str) -> str:
    """A message with its headless commands as keys; one without any is as it was.

    >>> at_console("to mend it: blendtui batch correct B-0001 3 KG --why TEXT; look again")
    'to mend it: e on the screen Floor; look again'
    >>> at_console("a batch is cancelled only with a reason; type why (--why TEXT)")
    'a batch is cancelled only with a reason; type why'
    """
    for phrase, key in PHRASES.items():
        message = message.replace(phrase, key)
    if "blendtui " not in message and "(--" not in message:
        return message
    return OPTION.sub("", COMMAND.sub(lambda found: KEYS.get(f"{found[1]} {found[2]}", found[0]), message))
