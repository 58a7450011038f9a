"""Requests to stop, by the signals that a shell, a service or a terminal sends."""

from __future__ import annotations

import os
import signal
import threading

import pytest

from benchrun.acquire.stop import StopRequest

SIGNALS = ["SIGINT", "SIGTERM", *(["SIGHUP"] if hasattr(signal, "SIGHUP") else [])]


@pytest.mark.parametrize("name", SIGNALS)
def test_the_first_signal_only_asks(name: str) -> None:
    stop = StopRequest()
    with stop.listening():
        signal.raise_signal(getattr(signal, name))
        assert stop.requested
    assert name in stop.reason or stop.reason == "Ctrl-C"


def test_the_second_signal_does_not_wait() -> None:
    stop = StopRequest()
    with stop.listening():
        signal.raise_signal(signal.SIGINT)
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGTERM)
    assert stop.reason == "Ctrl-C"


def test_after_that_nothing_interrupts_making_safe() -> None:
    stop = StopRequest()
    with stop.listening():
        signal.raise_signal(signal.SIGINT)
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(signal.SIGINT)
        for _ in range(3):
            signal.raise_signal(signal.SIGINT)


def interrupted_wait(stop: StopRequest) -> None:
    with stop.waiting():
        os.kill(os.getpid(), signal.SIGINT)
        threading.Event().wait(5.0)


def test_where_the_run_waits_the_first_signal_ends_the_wait() -> None:
    stop = StopRequest()
    with stop.listening(), pytest.raises(KeyboardInterrupt):
        interrupted_wait(stop)
    assert stop.requested


def test_a_wait_does_not_begin_after_a_request() -> None:
    stop = StopRequest()
    stop.request("Ctrl-C")
    with pytest.raises(KeyboardInterrupt), stop.waiting():
        pytest.fail("this waits for nobody")


def test_handlers_are_given_back() -> None:
    before = [signal.getsignal(getattr(signal, name)) for name in SIGNALS]
    with StopRequest().listening():
        assert signal.getsignal(signal.SIGTERM) not in before
    assert [signal.getsignal(getattr(signal, name)) for name in SIGNALS] == before


@pytest.mark.skipif(not hasattr(signal, "SIGHUP"), reason="no SIGHUP on this system")
def test_a_run_under_nohup_goes_on() -> None:
    before = signal.signal(signal.SIGHUP, signal.SIG_IGN)
    try:
        stop = StopRequest()
        with stop.listening():
            signal.raise_signal(signal.SIGHUP)
        assert not stop.requested
    finally:
        signal.signal(signal.SIGHUP, before)


def test_another_thread_leaves_signals_alone() -> None:
    before = signal.getsignal(signal.SIGTERM)
    seen: list[object] = []

    def run() -> None:
        with StopRequest().listening():
            seen.append(signal.getsignal(signal.SIGTERM))

    thread = threading.Thread(target=run)
    thread.start()
    thread.join()
    assert seen == [before]


def test_a_request_used_again_listens_again() -> None:
    stop = StopRequest()
    stop.deaf = True
    with stop.listening():
        assert not stop.deaf
