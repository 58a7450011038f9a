"""The bench and the calibration kit: models, loading, chains, and what a rehearsal is told."""

from benchrun.bench.kit import Kit
from benchrun.bench.load import load_bench, load_kit
from benchrun.bench.model import Bench

__all__ = ["Bench", "Kit", "load_bench", "load_kit"]
