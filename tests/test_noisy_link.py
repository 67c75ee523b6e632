"""A link that spoils and swallows bytes, both ways: what is believed is what was sent, and nothing hangs."""

from __future__ import annotations

import random
from pathlib import Path

import pytest
from tests.cable import Cable
from tests.helpers import FILM, plan, scenario, truth


class Noisy(Cable):
    """Of every thousand bytes some arrive as others, and some do not arrive."""

    def __init__(self, url: str, per_thousand: float, seed: int) -> None:
        super().__init__(url)
        self._chance = random.Random(seed)
        self._rate = per_thousand / 1000
        self.quiet = True

    def _spoil(self, data: bytes) -> bytes:
        if self.quiet:
            return data
        out = bytearray()
        for byte in data:
            if self._chance.random() >= self._rate:
                out.append(byte)
            elif self._chance.random() < 0.7:
                out.append(byte ^ 1 << self._chance.randrange(8))
        return bytes(out)

    def read_until(self, expected: bytes, size: int) -> bytes:
        return self._spoil(super().read_until(expected, size))

    def write(self, data: bytes) -> int:
        super().write(self._spoil(data))
        return len(data)


@pytest.mark.parametrize("seed", range(3))
@pytest.mark.parametrize("per_thousand", [0.1, 1.0])
def test_a_run_over_a_noisy_link_is_the_run_of_a_clean_one(
    tmp_path: Path, per_thousand: float, seed: int
) -> None:
    url = scenario(tmp_path, FILM) + f"?seed={seed}"
    rows = []
    for rate in (0.0, per_thousand):
        cable = Noisy(url, rate, seed)
        with cable.bench() as box:
            box.settle()
            run = box.start(plan(box, dwell=5.0))
            cable.quiet = False
            list(run)
            junk = box.junk
            assert (run.end, run.proven, box.lost) == ("complete", True, 0)
        cable.port.close()
        rows.append(run.rows)
    assert junk > 0
    numbers = [row[0] for row in rows[1]]
    assert numbers == sorted(set(numbers))
    assert [row[1:] for row in rows[0]] == [row[1:] for row in rows[1]]


@pytest.mark.parametrize("seed", range(2))
def test_a_link_that_spoils_every_line_ends_the_run_and_leaves_the_part_discharged(
    tmp_path: Path, seed: int
) -> None:
    cable = Noisy(scenario(tmp_path, FILM) + f"?seed={seed}", 60.0, seed)
    with cable.bench() as box:
        box.settle()
        run = box.start(plan(box, dwell=5.0))
        for _ in run:
            if run.state == "dwell":
                break
        cable.quiet = False
        begin = box.clock()
        try:
            list(run)
        except Exception as error:
            assert type(error).__name__ == "LinkError", error
        assert box.clock() - begin < 200
        cable.quiet = True
        cable.wait(60)
        assert abs(truth(box).part_V) < 1
        assert box.status()["state"] == "rest"
    cable.port.close()
