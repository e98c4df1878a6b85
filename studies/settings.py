"""How a question is answered, as opposed to what is asked: seed, samples or precision, workers."""

from dataclasses import dataclass, replace
from typing import Annotated, Literal

from pydantic import Field, model_validator

from mc.ledger import Part
from studies.validated import Record


class Settings(Record):
    """Settings common to all questions of a job."""

    seed: Annotated[int, Field(ge=0, lt=2**63)] = 1
    """seed of all random draws; 0 is a seed too"""
    samples: Annotated[int, Field(ge=1000, le=10**11)] | None = None
    """samples: devices for spread, dies for timing and loss, chips for pair; each question has its own default"""
    precision: Annotated[float, Field(gt=1e-5, lt=1)] | None = None
    """instead of samples: half-width of the 95 % interval to be reached, relative for a sigma, absolute for a yield"""

    @model_validator(mode="after")
    def _one_of_two(self):
        if self.samples is not None and self.precision is not None:
            raise ValueError("give 'samples' or 'precision', not both")
        return self


class Workers(Record):
    """Where the work is done. Nothing here changes an answer."""

    jobs: Annotated[int, Field(ge=1, le=1024)] = 1
    backend: Literal["loky", "threading", "multiprocessing"] = "loky"

    @property
    def ledger(self) -> None:
        """Workers alone keep nothing."""

    def keeping(self, ledger: Part | None) -> "Place":
        """The same workers, their finished work kept in a part of a ledger."""
        return Place(jobs=self.jobs, backend=self.backend, ledger=ledger)


@dataclass(frozen=True, kw_only=True)
class Place:
    """Workers, and where their finished work is kept."""

    jobs: int
    backend: str
    ledger: Part | None

    def keeping(self, ledger: Part | None) -> "Place":
        """The same workers with another ledger."""
        return replace(self, ledger=ledger)
