"""Messages, error queue and status model: IEEE 488.2 sections 6, 10, 11; SCPI-1999 volume 1 sections 4, 6, 9."""

from __future__ import annotations

from typing import Any

import pytest
from benchrun_sim.instruments import BY_ROLE, SignalSource
from benchrun_sim.rack import Rack
from benchrun_sim.scpi_errors import ErrorQueue
from benchrun_sim.scpi_instrument import Instrument
from benchrun_sim.scpi_status import Status
from hypothesis import given, settings
from hypothesis import strategies as st

from tests.sim.simulated_bench import balloon_wiring

NO_ERROR = '0,"No error"'


@pytest.fixture
def pump(rack: Rack) -> Instrument:
    pump = rack.instruments["pump"]
    assert isinstance(pump, SignalSource)
    pump.execute("*CLS")
    return pump


def ask(instrument: Instrument, message: str) -> str:
    return instrument.execute(message).decode("latin-1").removesuffix("\n")


def errors(instrument: Instrument) -> list[int]:
    found = []
    while not (entry := ask(instrument, "SYST:ERR?")).startswith("0,"):
        found.append(int(entry.split(",")[0]))
    return found


# ---- messages -------------------------------------------------------------------------------------------------------


@pytest.mark.parametrize(
    ("message", "answer"),
    [
        ("FREQ 2.3GHZ;FREQ?", "2300000000.0"),
        ("FREQ:CW 2.3E9;CW?", "2300000000.0"),  # the path stays at FREQuency
        ("FREQ:CW 1GHZ;:POW -7;:POW?;:FREQ?", "-7.0;1000000000.0"),  # a colon starts at the root
        ("SOUR:FREQ 1GHZ;*ESE 3;POW -9;*ESE?;POW?", "3;-9.0"),  # common commands leave the path alone
        ("freq max;freq?;freq min;freq?;freq def;freq?", "6500000000.0;100000.0;1000000000.0"),
        ("FREQ? MAX;FREQ? MINIMUM", "6500000000.0;100000.0"),
        ("OUTP ON;OUTP?;OUTP 0;OUTP?;OUTP 2.4;OUTP?;OUTP OFF;OUTP?", "1;0;1;0"),
        ("FREQ:MODE LIST;MODE?;MODE fixed;MODE?", "LIST;FIX"),
        ("LIST:FREQ 1GHZ,2 GHZ , 3E9;FREQ?;FREQ:POIN?", "1000000000.0,2000000000.0,3000000000.0;3"),
        ("SYST:VERS?", "1999.0"),
        ("SYST:KLOC ON;KLOC?", "1"),
        ("SOUR1:POW1:LEV1 -3;:POW?", "-3.0"),  # what exists once may be called number 1
        ("", ""),
        ("FREQ?;", "1000000000.0"),
    ],
)
def test_messages(pump: Instrument, message: str, answer: str) -> None:
    assert ask(pump, message) == answer
    assert errors(pump) == []


@pytest.mark.parametrize(
    ("message", "expected"),
    [
        ("FOO", [-113]),
        ("FOO?", [-113]),
        ("*IDN", [-113]),  # a query only
        ("*RST?", [-113]),
        ("FREQ", [-109]),
        ("FREQ 1GHZ,2GHZ", [-108]),
        ("*RST 1", [-108]),
        ("FREQ? 5", [-128]),
        ("FREQ 1GHZ;STAR 2", [-113]),  # the path is still the root
        ("FREQ 1 V", [-131]),
        ("POW -5 GHZ", [-131]),
        ("FREQ 'a'", [-158]),
        ("FREQ #13abc", [-168]),
        ("FREQ (@1)", [-178]),
        ("FREQ MAYBE", [-141]),
        ("OUTP MAYBE", [-141]),
        ("OUTP 1 V", [-138]),
        ("FREQ:MODE NOISE", [-224]),
        ("FREQ:MODE 3", [-128]),
        ("FREQ 99E9", [-222]),
        ("FREQ 1E400", [-222]),
        ("FREQ NAN", [-222]),
        ("FREQ INF", [-222]),
        ("POW 20.001", [-222]),
        ("SOUR2:FREQ 1E9", [-114]),
        ("*IDN?;*OPC?", [-440]),
        ("FOO;POW -3", [-113]),  # a command error ends the message
        ("FREQ 99E9;:POW 99;:BAR", [-222, -222, -113]),  # an execution error does not
        ("LIST:FREQ " + ",".join(["1E9"] * 20002), [-223]),
    ],
)
def test_error_numbers(pump: Instrument, message: str, expected: list[int]) -> None:
    pump.execute(message)
    assert errors(pump) == expected


def test_a_refused_setting_leaves_the_old_one(pump: Instrument) -> None:
    assert ask(pump, "POW -3;POW 30;POW?") == "-3.0"


def test_an_error_keeps_the_answers_before_it(pump: Instrument) -> None:
    assert ask(pump, "POW?;FOO?;FREQ?") == "0.0"


@pytest.mark.parametrize("role", BY_ROLE)
def test_the_mandatory_common_commands(role: str) -> None:
    """IEEE 488.2 section 10: the thirteen that every device has (from memory)."""
    text = "*CLS *ESE *ESE? *ESR? *IDN? *OPC *OPC? *RST *SRE *SRE? *STB? *TST? *WAI"
    mandatory = text.split()
    wiring = balloon_wiring()
    instrument = next(
        i for n, i in Rack(wiring, seed=1).instruments.items() if wiring["instruments"][n]["role"] == role
    )
    instrument.execute("*CLS")
    for header in mandatory:
        answer = ask(instrument, header + (" 0" if header in {"*ESE", "*SRE"} else ""))
        assert bool(answer) == header.endswith("?")
    assert errors(instrument) == []
    assert len(ask(instrument, "*IDN?").split(",")) == 4


SETTINGS: dict[str, st.SearchStrategy[Any]] = {
    "SOURce:FREQuency:CW": st.floats(1e5, 6.5e9),
    "SOURce:POWer:LEVel": st.floats(-110, 20),
    "OUTPut:STATe": st.booleans().map(int),
    "SOURce:FREQuency:MODE": st.sampled_from(["CW", "LIST"]),
    "SOURce:LIST:FREQuency": st.lists(st.floats(1e5, 6.5e9), min_size=1, max_size=3).map(
        lambda v: ",".join(map(repr, v))
    ),
    "TRIGger:SOURce": st.sampled_from(["IMM", "TTLT1"]),
    "SYSTem:KLOCk": st.booleans().map(int),
    "*ESE": st.integers(0, 255),
}
STEP = st.sampled_from(list(SETTINGS)).flatmap(lambda header: st.tuples(st.just(header), SETTINGS[header]))


def form(header: str, short: bool, lower: bool) -> str:
    text = "".join(c for c in header if not c.islower()) if short else header
    return text.lower() if lower else text


@given(st.lists(st.tuples(STEP, st.booleans(), st.booleans()), min_size=1, max_size=6))
@settings(max_examples=60, deadline=None)
def test_compound_messages_and_short_forms_do_the_same_as_separate_long_ones(steps: list[Any]) -> None:
    rack = Rack(balloon_wiring(), seed=1)
    one, two = rack.instruments["pump"], Rack(balloon_wiring(), seed=1).instruments["pump"]
    for (header, value), _, _ in steps:
        one.execute(f"{header} {value}")
    compound = ";".join(
        ("" if header.startswith("*") else ":") + f"{form(header, short, lower)} {value}"
        for (header, value), short, lower in steps
    )
    two.execute(compound)
    queries = ";".join(("" if header.startswith("*") else ":") + header + "?" for header in SETTINGS)
    assert one.settings == two.settings
    assert ask(one, queries) == ask(two, queries)
    assert ask(one, "SYST:ERR?") == ask(two, "SYST:ERR?") == NO_ERROR
    # and what was answered can be sent back
    answers = ask(one, queries).split(";")
    three = Rack(balloon_wiring(), seed=1).instruments["pump"]
    for header, answer in zip(SETTINGS, answers, strict=True):
        three.execute(f"{header} {answer}")
    assert three.settings == one.settings


@given(
    first=st.sampled_from(["LIST:FREQ 1E9", "LIST:POW -3", "FREQ:MODE CW"]), second=st.sampled_from(["FREQ?", "POW?"])
)
@settings(max_examples=20, deadline=None)
def test_the_path_of_a_unit_is_that_of_the_unit_before(first: str, second: str) -> None:
    pump = Rack(balloon_wiring(), seed=1).instruments["pump"]
    pump.execute("*CLS")
    path = first.split(" ", maxsplit=1)[0].rpartition(":")[0]
    known = f"{path}:{second[:-1]}" in {"LIST:FREQ", "LIST:POW"}
    relative = ask(pump, f"{first};{second}")
    assert (errors(pump) == []) is known
    absolute = ask(pump, f"{first};:{path}:{second}")
    assert relative == absolute


@given(st.text(st.characters(max_codepoint=255), max_size=60))
@settings(max_examples=300, deadline=None)
def test_no_message_whatever_breaks_an_instrument(text: str) -> None:
    rack = RACKS.setdefault("one", Rack(balloon_wiring(), seed=1))
    for instrument in rack.instruments.values():
        instrument.execute("*CLS")
        instrument.execute(text)
        assert ask(instrument, "*OPC?") == "1"
        errors(instrument)


RACKS: dict[str, Rack] = {}


# ---- error queue ----------------------------------------------------------------------------------------------------


@given(st.lists(st.one_of(st.none(), st.integers(-350, -100)), max_size=80))
def test_error_queue_against_a_list(actions: list[int | None]) -> None:
    """SCPI-1999 volume 2 section 21.8.1: first in, first out; on overflow the last entry becomes -350 (from memory)."""
    queue, model = ErrorQueue(), list[int]()
    for action in actions:
        if action is None:
            assert int(queue.pop().split(",")[0]) == (model.pop(0) if model else 0)
            continue
        queue.push(action)
        if len(model) < queue.DEPTH:
            model.append(action)
        else:
            model[-1] = -350
        assert len(queue) == len(model)


def test_overflow_through_the_instrument(pump: Instrument) -> None:
    for _ in range(40):
        pump.execute("FOO")
    assert ask(pump, "SYST:ERR:COUN?") == "30"
    assert errors(pump) == [-113] * 29 + [-350]


def test_error_text_is_one_string_whatever_the_detail(pump: Instrument) -> None:
    pump.execute("FREQ:MODE \"; 'x")
    assert ask(pump, "SYST:ERR?").count('"') == 2


# ---- status model ---------------------------------------------------------------------------------------------------


def test_power_on_sets_its_bit_once(rack: Rack) -> None:
    assert ask(rack.instruments["pump"], "*ESR?;*ESR?") == "128;0"


@pytest.mark.parametrize(
    ("message", "bit"),
    [("FOO", 0x20), ("FREQ 99E9", 0x10), ("*IDN?;*OPC?", 0x04), ("*OPC", 0x01)],  # IEEE 488.2 section 11.5.1
)
def test_event_bits(pump: Instrument, message: str, bit: int) -> None:
    pump.execute(message)
    assert ask(pump, "*ESR?;*ESR?") == f"{bit};0"


def test_status_byte_and_its_enables(pump: Instrument) -> None:
    pump.execute("*ESE 32;*SRE 255")
    assert ask(pump, "*SRE?") == "191"  # bit 6 cannot be enabled
    assert ask(pump, "*STB?") == "0"
    pump.execute("FOO")
    assert int(ask(pump, "*STB?")) == 0x04 | 0x20 | 0x40
    pump.execute("*SRE 0")
    assert int(ask(pump, "*STB?")) == 0x04 | 0x20
    pump.execute("*CLS")
    assert ask(pump, "*STB?;*ESE?;*SRE?") == "0;32;0"  # *CLS leaves enables alone


def test_reset_leaves_status_alone(pump: Instrument) -> None:
    pump.execute("*ESE 32;*SRE 4;FOO")
    pump.execute("*RST")
    assert ask(pump, "*ESE?;*SRE?") == "32;4"
    assert errors(pump) == [-113]


def test_questionable_register(pump: Instrument) -> None:
    """Condition follows the fact, event keeps its rise until read, enable lets it into bit 3 of the status byte."""
    assert isinstance(pump, SignalSource)
    pump.execute("ROSC:SOUR EXT;:STAT:QUES:ENAB 32")
    pump.reference_present = False
    assert ask(pump, "STAT:QUES:COND?;:STAT:QUES:ENAB?;*STB?") == "32;32;8"
    pump.reference_present = True
    assert ask(pump, "STAT:QUES:COND?;*STB?") == "0;8"
    assert ask(pump, "STAT:QUES?;:STAT:QUES:EVEN?;*STB?") == "32;0;0"
    pump.execute("STAT:PRES")
    assert ask(pump, "STAT:QUES:ENAB?;:STAT:OPER:ENAB?") == "0;0"


@given(
    st.integers(0, 255), st.integers(0, 255), st.integers(0, 32767), st.integers(0, 32767), st.booleans(), st.booleans()
)
def test_summaries(event_enable: int, events: int, condition: int, enable: int, queued: bool, available: bool) -> None:
    """IEEE 488.2 figure 11-1 and SCPI-1999 volume 1 figure 9-1, written as sums (from memory)."""
    status = Status()
    status.events, status.event_enable, status.service_enable = events, event_enable, 0xBF
    for bit in range(15):
        status.questionable.put(bit, bool(condition >> bit & 1))
    status.questionable.enable = enable
    if queued:
        status.errors.push(-100)
    byte = status.byte(message_available=available)
    expected = 4 * queued + 8 * bool(condition & enable) + 16 * available + 32 * bool(events & event_enable)
    assert byte == expected + (64 if expected else 0)


def test_the_front_panel_lock(pump: Instrument) -> None:
    assert pump.by_hand("POW -20")
    assert ask(pump, "POW?") == "-20.0"
    pump.execute("SYST:KLOC ON")
    assert not pump.by_hand("POW 0")
    assert ask(pump, "POW?") == "-20.0"
