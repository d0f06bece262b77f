"""The table of ratios at the end of a timed run of the benchmarks."""


def _row(bench):
    info = bench.extra_info
    return (str(info["row"]), f"{info['ratio']:.3f}", f"{info['target']:g}", bench.name)


def pytest_terminal_summary(terminalreporter, config):
    """Print row, ratio and target of every benchmark that was timed."""
    session = getattr(config, "_benchmarksession", None)
    timed = [] if session is None or session.disabled else session.benchmarks
    rows = [_row(bench) for bench in timed if "ratio" in bench.extra_info]
    if not rows:
        return
    terminalreporter.write_sep("=", "ratios to the baselines (performance targets)")
    for row in [("row", "ratio", "target", "benchmark"), *rows]:
        terminalreporter.write_line("{:<10} {:>7} {:>7}  {}".format(*row))
