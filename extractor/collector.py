"""The garbage collector in processes that do nothing but work through sheets."""

import gc

_THRESHOLDS = (200_000, 50, 100)


def ease() -> None:
    """Let the collector look for garbage more rarely.

    A table is made of millions of small objects that last to the end and refer to no circle; looking through them
    again and again would take about a tenth of the time.
    """
    gc.set_threshold(*_THRESHOLDS)
