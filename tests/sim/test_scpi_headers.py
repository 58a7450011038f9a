"""Headers against SCPI-1999 volume 1 section 6.2 (from memory)."""

from __future__ import annotations

import itertools
import re

import pytest
from benchrun_sim.instruments import BY_ROLE
from benchrun_sim.scpi_command import Command
from benchrun_sim.scpi_common import COMMON
from benchrun_sim.scpi_errors import ScpiError
from benchrun_sim.scpi_headers import CommandTable, declared_forms, header_pattern, short_form
from hypothesis import given, settings
from hypothesis import strategies as st

EVERY = [
    pytest.param(role, command, id=f"{role} {command.header}")
    for role, kind in BY_ROLE.items()
    for command in (*COMMON, *kind.COMMANDS)
]


@pytest.mark.parametrize(
    ("word", "short"),
    [  # SCPI-1999 volume 1 section 6.2.1, from memory
        ("FREQuency", "FREQ"),
        ("POWer", "POW"),
        ("OUTPut", "OUTP"),
        ("SWEep", "SWE"),
        ("BANDwidth", "BAND"),
        ("LIST", "LIST"),
        ("CW", "CW"),
    ],
)
def test_short_forms(word: str, short: str) -> None:
    assert short_form(word) == short
    assert declared_forms(word) == (short, word.upper())


@pytest.mark.parametrize(("role", "command"), EVERY)
def test_every_declared_mnemonic_keeps_the_rule(role: str, command: Command) -> None:
    for mnemonic in re.findall(r"[A-Za-z]+", command.header.replace("<n>", "").lstrip("*")):
        assert declared_forms(mnemonic)[0] == short_form(mnemonic)
        assert len(mnemonic) <= 12  # IEEE 488.2 section 7.6.1.4.1, from memory


def test_no_spelling_means_two_commands() -> None:
    for kind in BY_ROLE.values():
        table = (*COMMON, *kind.COMMANDS)
        spelt = [set(all_spellings(command.header)) for command in table]
        for one, other in itertools.combinations(range(len(table)), 2):
            shared = spelt[one] & spelt[other]
            assert not shared, (kind, table[one].header, table[other].header)


@given(data=st.data())
@settings(max_examples=300, deadline=None)
def test_every_spelling_finds_its_command(data: st.DataObject) -> None:
    kind = data.draw(st.sampled_from(list(BY_ROLE.values())))
    command = data.draw(st.sampled_from([*COMMON, *kind.COMMANDS]))
    table = CommandTable([*COMMON, *kind.COMMANDS])
    spelling = data.draw(st.sampled_from(all_spellings(command.header)))
    found, suffixes = table.find(spelling.upper())
    assert found is command
    assert suffixes == (1,) * len(command.suffix_limits)


@given(channel=st.integers(0, 300))
@settings(max_examples=50, deadline=None)
def test_numeric_suffixes(channel: int) -> None:
    table = CommandTable([Command("[SOURce<n>:]VOLTage[:LEVel]", suffix_limits=(2,))])
    if channel in {1, 2}:
        assert table.find(f"SOUR{channel}:VOLT")[1] == (channel,)
    else:
        assert why(table, f"SOUR{channel}:VOLT") == -114


def test_headers_that_are_not_known() -> None:
    table = CommandTable([Command("[SENSe:]FREQuency[:CW|FIXed]"), Command("*RST")])
    assert why(table, "FREQU") == -113
    assert why(table, "FRE") == -113
    assert why(table, "FREQ:STAR") == -113
    assert why(table, "*RSTX") == -113
    assert why(table, "RST") == -113
    assert why(table, "SENS:ABCDEFGHIJKLM") == -112
    assert why(table, "SENS2:FREQ") == -114


def why(table: CommandTable[Command], header: str) -> int:
    with pytest.raises(ScpiError) as caught:
        table.find(header)
    return caught.value.number


def test_the_table_of_found_headers_does_not_grow_without_bound() -> None:
    table = CommandTable([Command("A<n>", suffix_limits=(10**9,))])
    for number in range(1, 6000):
        table.find(f"A{number}")
    assert len(table._found) <= 4096


def all_spellings(header: str) -> list[str]:
    """Write a declared header out in every way the standard allows (independently of the pattern that is tested)."""
    if header.startswith("*"):
        return [header]
    parts = re.findall(r"\[[^\]]*\]|[^\[\]]+", header)
    choices = [["", *nodes(part[1:-1])] if part.startswith("[") else nodes(part) for part in parts]
    return ["".join(pieces) for pieces in itertools.product(*choices)]


def nodes(text: str) -> list[str]:
    pieces = re.findall(r":|[^:]+", text)
    options = [[":"] if piece == ":" else mnemonics(piece) for piece in pieces]
    return ["".join(chosen) for chosen in itertools.product(*options)]


def mnemonics(piece: str) -> list[str]:
    forms = []
    for word in piece.replace("<n>", "").split("|"):
        forms += [short_form(word), word.upper(), word.lower()]
    return list(dict.fromkeys(forms))


def test_a_declaration_that_is_no_header_is_refused() -> None:
    with pytest.raises(AssertionError):
        header_pattern("SENSe FREQuency")
