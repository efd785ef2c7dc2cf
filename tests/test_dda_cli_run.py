"""What ends a run early: signals that are not lost, and those that are ignored."""

import signal
import sys

import pytest

from dda.cli_run import _Interruption


@pytest.fixture(params=[name for name in ("SIGINT", "SIGTERM", "SIGHUP") if hasattr(signal, name)])
def number(request):
    """A signal; its handler is restored."""
    found = getattr(signal, request.param)
    before = signal.getsignal(found)
    yield found
    signal.signal(found, before)


def test_a_signal_interrupts_and_is_remembered(number):
    with _Interruption() as interruption:
        interruption.check()
        with pytest.raises(KeyboardInterrupt):
            signal.raise_signal(number)
        with pytest.raises(KeyboardInterrupt):  # a library may have swallowed the first one
            interruption.check()


def test_the_handler_from_before_comes_back(number):
    handler = lambda *_: None  # noqa: E731
    signal.signal(number, handler)
    with _Interruption():
        assert signal.getsignal(number) is not handler
    assert signal.getsignal(number) is handler


def test_a_signal_that_is_ignored_stays_so(number):
    signal.signal(number, signal.SIG_IGN)
    with _Interruption() as interruption:
        signal.raise_signal(number)
        interruption.check()
    assert signal.getsignal(number) is signal.SIG_IGN


def test_a_signal_in_a_destructor_is_remembered_and_prints_nothing(monkeypatch):
    told = []
    monkeypatch.setattr(sys, "unraisablehook", lambda found: told.append(found.exc_type))

    class Dying:
        def __del__(self):
            signal.raise_signal(signal.SIGINT)  # what is raised here, Python can only print

    class Broken:
        def __del__(self):
            raise ValueError("a mistake of its own")

    with _Interruption() as interruption:
        dying = Dying()
        del dying
        assert interruption.asked
        assert told == []
        broken = Broken()
        del broken
    assert told == [ValueError]
