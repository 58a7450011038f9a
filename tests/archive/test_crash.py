"""A process that is killed in the middle: every reading whose commit had returned is there, whole, and nothing else."""

from __future__ import annotations

import subprocess
import sys
from pathlib import Path

import pytest

from benchrun.archive import ArchiveWriter, open_archive
from tests.archive.readings import reading, same

WRITES = """
import sys
from pathlib import Path
from benchrun.archive import ArchiveWriter
from tests.archive.readings import META, reading
writer = ArchiveWriter.create(Path(sys.argv[1]), META)
for k in range(100_000):
    writer.commit(reading(k))
    print(k, flush=True)
"""


@pytest.mark.parametrize("after", [0, 1, 7, 60, 500])
def test_kill_9_loses_no_committed_reading(after: int, tmp_path: Path) -> None:
    root = Path(__file__).parents[2]
    process = subprocess.Popen(
        [sys.executable, "-c", WRITES, str(tmp_path)], stdout=subprocess.PIPE, text=True, cwd=root
    )
    with process:
        assert process.stdout is not None
        said = [int(process.stdout.readline()) for _ in range(after + 1)]
        process.kill()
        said += [int(line) for line in process.stdout if line.endswith("\n")]
    with open_archive(tmp_path) as reader:
        assert reader.check() == []
        assert reader.meta.state == "running"
        found = list(reader.readings())
    assert len(said) <= len(found) <= len(said) + 1  # the last may be committed and not said
    assert all(same(one, reading(k)) for k, one in enumerate(found))
    with ArchiveWriter.append(tmp_path) as writer:  # the lock of a dead writer is no lock
        writer.commit(reading(len(found)))
    with open_archive(tmp_path) as reader:
        assert reader.count == len(found) + 1
    assert [file.name for file in tmp_path.iterdir()] == ["archive.sqlite"]
