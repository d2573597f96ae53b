"""One thread for the numerical libraries: the machine is filled by several jobs at a time."""

from functools import cache

from threadpoolctl import ThreadpoolController


@cache
def _libraries() -> ThreadpoolController:
    """The libraries of this process; looking for them takes longer than a small job's solution."""
    return ThreadpoolController()


def one_thread():  # type: ignore[no-untyped-def]  # the library names no type for this
    """A context in which every numerical library uses one thread.

    Many small fronts and gathers: a second thread costs more than it brings (measured: ten to a
    hundred times the time of a factorisation).
    """
    return _libraries().limit(limits=1)
