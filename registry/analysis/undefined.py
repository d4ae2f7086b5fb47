"""A number that cannot be computed, and why."""

from __future__ import annotations

from dataclasses import dataclass


@dataclass(frozen=True)
class Undefined:
    """Stands where a number would stand; pages show a dash with the reason, records show null."""

    reason: str


Number = float | Undefined
EMPTY_CELL = Undefined("it averages over a combination without trials")
NO_FREEDOM = Undefined("no error estimate yet: no combination has been run twice")
NO_SPREAD = Undefined("cannot say: readings within a combination do not vary at all")
LONE_TRIAL = Undefined("its own spread needs two trials in every combination used")
ALIASED = Undefined("aliased with blocks")
CONFOUNDED = Undefined("the blocks do not let it be told apart")
BLOCKS_SHARE = Undefined("with blocks the spread is shared by all combinations")
EQUAL_WEIGHT_BLOCK = Undefined("blocks are allowed for, not tested with equal weights")
