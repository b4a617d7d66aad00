"""One case: a seed, broken by its number, taken through the readers and the rest of the way."""

from __future__ import annotations

import resource
import signal
import time
import traceback
from dataclasses import dataclass
from random import Random
from typing import TYPE_CHECKING

from pipeline.problems import DeliveryProblem
from pipeline.process import process_cruise
from pipeline.reading import read_delivery, survey_cruises
from pipeline.settings import Settings
from tests.fuzz.mutations import broken
from tests.fuzz.seeds import Seed, seeds, slow_seed

if TYPE_CHECKING:
    from types import FrameType

MOST_SECONDS = 10
MOST_MEGABYTES = 1000
SLOW_SHARE = 0.01
SETTINGS = Settings()


@dataclass(frozen=True, slots=True)
class Outcome:
    """What became of a case: read, refused, or a fault of ours with what was seen of it."""

    number: int
    seed: str
    result: str  # "read", "refused", "fault", "slow", "large", "crash", "hang"
    seconds: float = 0.0
    said: str = ""

    @property
    def good(self) -> bool:
        """Whether the case ended as a case must."""
        return self.result in {"read", "refused"}


def case(number: int) -> tuple[Seed, bytes]:
    """Return the seed of a case and its broken bytes; the same for the same number."""
    random = Random(number)
    seed = slow_seed() if random.random() < SLOW_SHARE else random.choice(seeds())
    return seed, broken(seed.data, random)


def run_case(number: int) -> Outcome:
    """Take one case through: survey, reading (where every row is accounted for or reading fails), processing."""
    seed, data = case(number)
    signal.signal(signal.SIGALRM, _too_slow)
    signal.alarm(MOST_SECONDS)
    start = time.perf_counter()
    result, said = "read", ""
    try:
        survey_cruises(seed.name, data, SETTINGS.reading, seed.description)
        delivery = read_delivery(seed.name, data, SETTINGS.reading, seed.description)
        for cruise in delivery.cruises:
            process_cruise(cruise, [delivery.of_cruise(cruise)], SETTINGS)
    except DeliveryProblem as problem:
        result, said = "refused", str(problem)
    except TimeoutError:
        result = "slow"
    except Exception:  # noqa: BLE001 - that is what is looked for
        result, said = "fault", traceback.format_exc()
    finally:
        signal.alarm(0)
    if resource.getrusage(resource.RUSAGE_SELF).ru_maxrss / 1024 > MOST_MEGABYTES:
        result = "large"
    return Outcome(number, seed.name, result, time.perf_counter() - start, said)


def _too_slow(_number: int, _frame: FrameType | None) -> None:
    raise TimeoutError
