"""Serve simulated instruments on loopback, and write the bench file that points at them."""

from __future__ import annotations

import io
import threading
from collections.abc import Mapping
from pathlib import Path

from benchrun.bench import Bench, Kit, load_bench, load_kit
from benchrun.contract.rehearsal import Served
from benchrun.drivers.registry import load_registry
from benchrun.errors import FileProblemsError, FolderError, InputError, Problem
from benchrun.flow.inputs import roles
from benchrun.flow.rehearse import rehearsal_plugin


class ServedBench:
    """A simulated bench while it is served; close() ends it."""

    def __init__(self, served: Served) -> None:
        self._served = served
        self._ended = threading.Event()

    @property
    def hislip(self) -> Mapping[str, str]:
        """HiSLIP resource string of each instrument."""
        return self._served.hislip

    @property
    def sockets(self) -> Mapping[str, str]:
        """Raw-socket resource string of each instrument."""
        return self._served.sockets

    @property
    def channel(self) -> str:
        """Address of the rehearsal channel, host:port."""
        return self._served.channel

    def wait(self) -> None:
        """Serve until close(), or until a signal interrupts."""
        while not self._ended.wait(0.5):
            pass

    def close(self) -> None:
        """Stop serving; twice does no harm."""
        self._ended.set()
        self._served.close()


def simulate(bench_path: Path, seed: int, write_bench: Path | None = None) -> ServedBench:
    """Serve the instruments of a bench on loopback. Raises FileProblemsError, InputError, FolderError."""
    bench, problems = load_bench(bench_path, roles(load_registry()))
    if bench is None:
        raise FileProblemsError(problems)
    if bench.simulated:
        raise InputError(
            f"{bench_path}: points at a served simulation itself. Give the bench file that it was written from."
        )
    try:
        served = ServedBench(rehearsal_plugin().serve(bench.wiring(rehearsal_kit(bench)), seed=seed))
    except ValueError as error:
        raise FileProblemsError(
            [Problem(str(bench_path), 0, 0, f"the simulated bench cannot be built of this bench file: {error}.")]
        ) from error
    try:
        if write_bench is not None:
            write_served_bench(bench, served, write_bench)
    except BaseException:
        served.close()
        raise
    return served


def rehearsal_kit(bench: Bench) -> Kit | None:
    """Return the kit that the simulated operator has at hand: the one that the bench's rehearsal part names."""
    name = bench.rehearsal.kit if bench.rehearsal is not None else None
    if name is None:
        return None
    kit, problems = load_kit(bench.path.parent / name)
    if kit is None:
        raise FileProblemsError(problems)
    return kit


def write_served_bench(bench: Bench, served: ServedBench, target: Path) -> None:
    """Write `bench` with the addresses of its served instruments; its comments stay. Raises FolderError."""
    from ruamel.yaml import YAML

    yaml = YAML()
    yaml.width = 400
    document = yaml.load(bench.text)
    document["simulated"] = True
    document["rehearsal-channel"] = served.channel
    document["visa"] = {"backend": "py"}
    for name, entry in document["instruments"].items():
        entry["address"] = served.hislip[name]
    text = io.StringIO()
    yaml.dump(document, text)
    try:
        target.parent.mkdir(parents=True, exist_ok=True)
        _copy_beside(bench, target.parent)
        target.write_text(text.getvalue(), encoding="utf-8")
    except OSError as error:
        raise FolderError(
            f"{target}: cannot be written ({error.strerror or error}). Choose another file with --write-bench."
        ) from error


def _copy_beside(bench: Bench, folder: Path) -> None:
    """Copy the files that the bench names to where the new file stands, unless they are there."""
    texts = dict(bench.files)
    for name, instrument in bench.instruments.items():
        path = bench.dialect_path(name)
        if path is not None and instrument.dialect is not None:
            texts[instrument.dialect] = path.read_text("utf-8")
    kit = rehearsal_kit(bench)
    if kit is not None and bench.rehearsal is not None and bench.rehearsal.kit is not None:
        texts |= {bench.rehearsal.kit: kit.text, **kit.files}
    for name, text in texts.items():
        path = folder / name
        if not path.exists():
            path.parent.mkdir(parents=True, exist_ok=True)
            path.write_text(text, encoding="utf-8", newline="")
