"""The link's own clock, and Ctrl-C held back."""

from __future__ import annotations

import signal
import threading

import pytest
import serial

from dwellbench.wire import clock as clock_module
from dwellbench.wire.clock import TURN_S, PortClock, WallClock
from dwellbench.wire.held import held


class Wall:
    """The wall's time, in the test's hand."""

    def __init__(self) -> None:
        self.now = 1e6

    def monotonic(self) -> float:
        return self.now

    def sleep(self, seconds: float) -> None:
        self.now += seconds


@pytest.fixture
def wall(monkeypatch: pytest.MonkeyPatch) -> Wall:
    wall = Wall()
    monkeypatch.setattr(clock_module, "time", wall)
    return wall


@pytest.mark.parametrize("scale", [0.25, 1.0, 40.0])
def test_a_clock_goes_on_without_a_jump_when_its_pace_changes(wall: Wall, scale: float) -> None:
    clock = WallClock()
    wall.now += 3.0
    clock.rescale(scale)
    assert clock.now() == pytest.approx(3.0)
    wall.now += 2.0
    assert clock.now() == pytest.approx(3.0 + 2.0 * scale)


def test_waiting_is_in_the_box_s_seconds(wall: Wall) -> None:
    clock = WallClock()
    clock.rescale(10.0)
    assert clock.port_timeout(5.0) == pytest.approx(0.5)
    clock.pause(20.0)
    assert wall.now == pytest.approx(1e6 + 2.0)
    assert clock.now() == pytest.approx(20.0)


def test_patience_leaves_the_other_process_its_turn(wall: Wall) -> None:
    clock = WallClock()
    assert clock.patience(1.0) == 1.0
    clock.rescale(50.0)
    assert clock.port_timeout(clock.patience(1.0)) == pytest.approx(TURN_S)


def test_virtual_time_passes_only_by_waiting() -> None:
    import dwellbench  # noqa: F401 -- makes emu:// known

    with serial.serial_for_url("emu://film?seed=1") as port:
        clock = PortClock(port)
        begin = clock.now()
        assert clock.now() == begin
        clock.pause(2.0)
        assert clock.now() == pytest.approx(begin + 2.0)


def test_an_interrupt_waits_for_the_end_of_the_block_and_of_the_outer_one() -> None:
    done = []
    with pytest.raises(KeyboardInterrupt), held():
        with held():
            signal.raise_signal(signal.SIGINT)
            done.append("inner")
        done.append("outer")
    assert done == ["inner", "outer"]
    assert signal.getsignal(signal.SIGINT) is signal.default_int_handler


def test_an_interrupt_comes_through_an_error_of_the_block() -> None:
    with pytest.raises(KeyboardInterrupt), held():
        signal.raise_signal(signal.SIGINT)
        raise ValueError
    with pytest.raises(ValueError, match="own"), held():
        raise ValueError("own")


def test_another_thread_holds_nothing_back() -> None:
    """Handlers belong to the main thread; elsewhere setting one would be an error."""
    failed: list[BaseException] = []

    def work() -> None:
        try:
            with held():
                pass
        except BaseException as error:
            failed.append(error)

    thread = threading.Thread(target=work)
    thread.start()
    thread.join()
    assert failed == []
