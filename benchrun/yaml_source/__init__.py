"""YAML files that people write: data with the place of every key and value, checked against a model, all at once."""

from benchrun.yaml_source.checking import Strict, check
from benchrun.yaml_source.places import Mark, Path_, Placed, PlacedList, Source
from benchrun.yaml_source.reader import MAX_BYTES, MAX_DEPTH, MAX_NODES, read_source, read_text
from benchrun.yaml_source.salvage import apart_from, salvage
from benchrun.yaml_source.schema import json_schema

__all__ = [
    "MAX_BYTES",
    "MAX_DEPTH",
    "MAX_NODES",
    "Mark",
    "Path_",
    "Placed",
    "PlacedList",
    "Source",
    "Strict",
    "apart_from",
    "check",
    "json_schema",
    "read_source",
    "read_text",
    "salvage",
]
