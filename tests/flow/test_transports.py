"""A served bench: the same way over HiSLIP and over raw sockets, its seed, and what is said where it does not fit."""

from __future__ import annotations

import gc
import logging
import warnings
from collections.abc import Iterator
from contextlib import closing
from pathlib import Path
from typing import Any

import pytest

from benchrun.archive import open_archive
from benchrun.cli.ending import run_to_end
from benchrun.errors import IdentityError, InputError, LinkError, UnsafeError
from benchrun.flow import RunResult, ServedBench, rehearse, simulate
from benchrun.flow.channel import ServedTime
from tests.benchmarks.transports import Found, by_every_way, to_sockets
from tests.flow.conftest import Way
from tests.flow.stage import BENCH, COLD, HOT, SMALL, Silence, recipes_in


@pytest.fixture(scope="module")
def ways(tmp_path_factory: pytest.TempPathFactory) -> dict[str, Found]:
    return by_every_way(tmp_path_factory.mktemp("ways"), SMALL)


@pytest.mark.parametrize("way", ["HiSLIP", "raw sockets"])
def test_the_same_readings_and_the_same_files(ways: dict[str, Found], shared: Way, way: str) -> None:
    here, there = ways["in-process"], ways[way]
    assert len(here.digests) == 3
    assert len(here.files) == 3 + 2 * 3
    assert there.digests == here.digests
    assert there.schedules == here.schedules
    assert there.files == here.files
    with open_archive(shared.hot) as archive:
        assert archive.digest() == there.digests["0042_hot-output-match"]


def test_dates_apart_the_files_are_compared_whole(ways: dict[str, Found]) -> None:
    text = ways["in-process"].files["0042_hot-output-match/0042_p14.0dBm_S22.s1p"]
    assert text.count(b"DATE") == 3
    assert b"SIMULATED, seed 1" in text
    assert b"schedule: " in text


@pytest.fixture(scope="module")
def recipes(tmp_path_factory: pytest.TempPathFactory) -> Path:
    return recipes_in(tmp_path_factory.mktemp("served") / "recipes", SMALL)


@pytest.fixture(scope="module")
def written(recipes: Path) -> Path:
    return recipes.parent / "bench" / "served.bench.yaml"


@pytest.fixture(scope="module")
def served(recipes: Path, written: Path) -> Iterator[ServedBench]:
    with closing(simulate(recipes / BENCH, 3, written)) as bench:
        yield bench


def cold(recipes: Path, runs: Path, bench: Path | None, **how: Any) -> RunResult:
    return rehearse(recipes / COLD, runs, bench=bench, listener=Silence(), **how)


def digest(result: RunResult) -> str:
    with open_archive(result.folder) as archive:
        return archive.digest()


def test_without_a_seed_it_is_that_of_the_served_bench(
    recipes: Path, written: Path, served: ServedBench, tmp_path: Path
) -> None:
    over = cold(recipes, tmp_path / "over", written)
    with open_archive(over.folder) as archive:
        assert (archive.meta.origin, archive.meta.seed) == ("simulated, seed 3", 3)
    assert digest(over) == digest(cold(recipes, tmp_path / "here", None, seed=3))
    assert digest(over) == digest(cold(recipes, tmp_path / "same", written, seed=3))


def test_another_seed_than_the_served_benchs_is_refused(
    recipes: Path, written: Path, served: ServedBench, tmp_path: Path
) -> None:
    with pytest.raises(InputError) as refused:
        cold(recipes, tmp_path / "runs", written, seed=1)
    assert "--seed 1" in str(refused.value)
    assert "simulated with seed 3" in str(refused.value)
    assert "benchrun simulate --seed 1" in str(refused.value)
    assert not (tmp_path / "runs").exists()


def test_the_command_takes_the_seed_of_the_served_bench(
    recipes: Path, written: Path, served: ServedBench, tmp_path: Path, capsys: pytest.CaptureFixture[str]
) -> None:
    told = ["rehearse", recipes / COLD, "--to", tmp_path / "runs", "--bench", written]
    assert run_to_end([str(word) for word in told]) == 0
    with open_archive(Path(capsys.readouterr().out.splitlines()[-1])) as archive:
        assert archive.meta.seed == 3
    assert run_to_end([*(str(word) for word in told), "--seed", "1"]) == 2
    assert "simulated with seed 3" in capsys.readouterr().err


def test_the_written_bench_file_keeps_its_comments_and_stands_alone(
    recipes: Path, written: Path, served: ServedBench
) -> None:
    text = written.read_text("utf-8")
    assert "# CAUTION" in text
    assert "benchrun never sends more than this" in text
    assert sorted(path.name for path in written.parent.iterdir()) == sorted(
        [written.name, "simulated-wave-receiver.dialect.yaml", "field-kit.kit.yaml"]
    )


def test_a_bench_that_is_no_longer_served_says_so(recipes: Path, tmp_path: Path) -> None:
    gone = tmp_path / "gone.bench.yaml"
    simulate(recipes / BENCH, 1, gone).close()
    with pytest.raises(LinkError, match="nothing serves a simulated bench there"):
        cold(recipes, tmp_path / "runs", gone)


def test_a_served_bench_is_not_served_again(recipes: Path, written: Path, served: ServedBench) -> None:
    with pytest.raises(InputError, match="points at a served simulation itself"):
        simulate(written, 1)


def test_tones_that_are_not_what_the_bench_file_says_are_refused(
    recipes: Path, written: Path, served: ServedBench, tmp_path: Path
) -> None:
    other = written.with_name("retuned.bench.yaml")
    to_sockets(served, written, other)
    other.write_text(other.read_text("utf-8").replace("tones: coherent", "tones: retuned"), "utf-8")
    with pytest.raises(IdentityError, match="the bench file says `tones: retuned`, the instrument says coherent"):
        cold(recipes, tmp_path / "runs", other)


class Unplugs(Silence):
    """Takes a served bench away as soon as the device is at its bias."""

    def __init__(self, bench: ServedBench) -> None:
        super().__init__()
        self._bench = bench

    def phase(self, *told: Any) -> None:
        """Stop serving."""
        self._bench.close()


@pytest.fixture
def refused() -> Iterator[None]:
    """pyvisa-py leaves a socket that was refused to the garbage collector, which complains; log records hold it."""
    logging.disable()
    with warnings.catch_warnings():
        warnings.simplefilter("ignore", ResourceWarning)
        yield
        gc.collect()
    logging.disable(logging.NOTSET)


@pytest.mark.usefixtures("refused")
def test_a_served_bench_that_goes_away_is_a_fault_and_nothing_is_said_to_be_off(small: Way, tmp_path: Path) -> None:
    bench = tmp_path / "served.bench.yaml"
    with closing(simulate(small.recipes / BENCH, 1, bench)) as serving, pytest.raises(UnsafeError) as ended:
        rehearse(small.recipes / HOT, small.runs, bench=bench, listener=Unplugs(serving))
    for said in ("PUMP NOT CONFIRMED", "DRAIN NOT CONFIRMED", "gate not touched", "readings are safe in"):
        assert said in str(ended.value)


class Gone:
    """A clock whose channel breaks after the first answer."""

    virtual = True

    def __init__(self) -> None:
        self._left = 1

    def now_ns(self) -> int:
        """Answer once."""
        self._left -= 1
        if self._left < 0:
            raise BrokenPipeError(32, "Broken pipe")
        return 7

    def sleep(self, duration_s: float) -> None:
        """Break."""
        raise BrokenPipeError(32, "Broken pipe")

    align = sleep


def test_the_time_of_a_bench_that_is_gone_stands_still_and_waiting_for_it_is_told() -> None:
    clock = ServedTime(Gone(), "127.0.0.1:1")
    assert [clock.now_ns(), clock.now_ns()] == [7, 7]
    for wait in (clock.sleep, clock.align):
        with pytest.raises(LinkError, match=r"127\.0\.0\.1:1: the simulated bench has gone away"):
            wait(1)
