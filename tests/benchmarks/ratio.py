"""Paired rounds: product and baseline in turn, compared by their medians.

On a shared machine two things timed one after the other drift apart; in turn within
each round they do not. A command that runs benchmarks without timing them
(``--benchmark-disable``) makes a single round, which checks that they work.
"""

import statistics
import time

#: Machines are shared: a benchmark fails only beyond 1.3 times its target.
SLACK = 1.3


def timed(function, timer, calls):
    """Call a function some times over and give the seconds of one call."""
    before = timer()
    for _ in range(calls):
        function()
    return (timer() - before) / calls


def paired_ratio(
    benchmark,
    row,
    target,
    product,
    baseline,
    rounds=9,
    calls=1,
    timer=time.process_time,
):
    """Time product and baseline in turn and hold the ratio of medians to a target.

    Parameters
    ----------
    benchmark : fixture
        Of pytest-benchmark; keeps the product's times and, as extra information,
        row, target and ratio.
    row : int
        Row of the table of performance targets.
    target : float
        Largest ratio wanted.
    product, baseline : callable
        Without arguments; check before that both give the same answer.
    rounds, calls : int
        Rounds after one warm-up, and calls of the product and the baseline in each.
    timer : callable
        Seconds of processor time by default.

    Returns
    -------
    float
        Ratio of the medians; of one round where nothing is timed.
    """
    seconds = {"product": [], "baseline": []}

    def a_round():
        seconds["baseline"].append(timed(baseline, timer, calls))
        seconds["product"].append(timed(product, timer, calls))

    a_round()
    if not benchmark.disabled:
        for times in seconds.values():
            times.clear()
        for _ in range(rounds):
            a_round()
    benchmark.pedantic(product, rounds=1 if benchmark.disabled else rounds)
    ratio = statistics.median(seconds["product"]) / statistics.median(
        seconds["baseline"]
    )
    benchmark.extra_info.update(row=row, target=target, ratio=round(ratio, 4))
    if not benchmark.disabled:
        assert ratio <= SLACK * target, f"row {row}: {ratio:.3f}, target {target:g}"
    return ratio
