"""What made a number: version, options, seed, inputs, sources. Never the clock, so that the same
inputs give the same record."""

from __future__ import annotations

import hashlib
import zlib
from collections.abc import Mapping
from dataclasses import dataclass, field
from importlib import metadata
from typing import Any


@dataclass(frozen=True)
class RunRecord:
    """The record of a run.

    Attributes
    ----------
    version : str
        Version of leachkin.
    seed : int
        The one seed; each stage spawns its own by name.
    options : mapping
        What was asked: draws, level, what-ifs.
    inputs : mapping of str to str
        SHA-256 of every file read, by the name it was given.
    sources : tuple of str
        Keys of the published sources whose numbers were used.
    """

    version: str
    seed: int
    options: Mapping[str, Any] = field(default_factory=dict)
    inputs: Mapping[str, str] = field(default_factory=dict)
    sources: tuple[str, ...] = ()

    def to_dict(self) -> dict[str, Any]:
        """Return the record as plain types for JSON."""
        return {
            "version": self.version,
            "seed": self.seed,
            "options": dict(self.options),
            "inputs": dict(sorted(self.inputs.items())),
            "sources": sorted(self.sources),
        }


def program_version() -> str:
    """Return the installed version of leachkin."""
    return metadata.version("leachkin")


def sha256_of(content: bytes) -> str:
    """Return the SHA-256 of a file's content, in hexadecimal."""
    return hashlib.sha256(content).hexdigest()


def stage_seed(seed: int, stage: str) -> int:
    """Return the seed of a stage, made from the run's seed and the stage's name.

    Adding a stage therefore moves no other stage's numbers.

    Examples
    --------
    >>> stage_seed(1, "heap") == stage_seed(1, "heap")
    True
    >>> stage_seed(1, "heap") == stage_seed(1, "tank")
    False
    """
    import numpy

    words = [seed & 0xFFFFFFFF, seed >> 32, zlib.crc32(stage.encode())]
    return int(numpy.random.SeedSequence(words).generate_state(1, numpy.uint64)[0] >> 1)
