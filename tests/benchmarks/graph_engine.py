"""How fast the graph engine is, beside networkx, on the same work in the same run.

    python tests/benchmarks/graph_engine.py              # everything; the rival is stopped after 30 s
    python tests/benchmarks/graph_engine.py --edges 1000 10000 --sets 10 1000 --limit 20

Judging a set and finding one minimal set are compared with networkx's d-separation on graphs of growing
size, listing all minimal sets with testing subsets one after the other. Wherever both finish, their answers
are compared, and a difference ends the run. The slope is that of log time against log arrows: 1 is
proportional.
"""

from __future__ import annotations

import argparse
import gc
import math
import time
from collections.abc import Callable, Iterator
from itertools import combinations

import networkx as nx
import numpy as np
from graph_clock import Timing, limited, median, once, peak_memory, ratio, show
from graph_problems import Problem, deep_graph, ladder, random_graph

from adjustplan import identify
from adjustplan.graph import CausalGraph

Times = dict[str, list[tuple[int, float]]]
GIVEN_UP: set[tuple[str, str]] = set()  # kinds of graph and of work on which the rival was stopped


def main() -> None:
    options = argparse.ArgumentParser(description=__doc__, formatter_class=argparse.RawTextHelpFormatter)
    sizes = [10**3, 10**4, 10**5, 10**6]
    options.add_argument("--edges", type=int, nargs="*", default=sizes, help="sizes of the graphs")
    options.add_argument("--sets", type=int, nargs="*", default=[10, 10**3, 10**5], help="lengths of the lists")
    options.add_argument(
        "--limit", type=float, default=30.0, help="seconds after which the rival is stopped (its memory grows too)"
    )
    asked = options.parse_args()
    for engine in ("small", "large"):  # so that no import is timed
        identify.is_sufficient(ladder(1), "exposure", "outcome", (), engine=engine)
    for build in (random_graph, deep_graph):
        times: Times = {}
        for edges in asked.edges:
            questions(build(edges), asked.limit, times)
        slopes(times)
    for length in asked.sets:
        listing(length, asked.limit)


def questions(problem: Problem, limit: float, times: Times) -> None:
    """Judge the candidate sets of one graph and find one minimal set."""
    graph, exposure, outcome = problem.graph, problem.exposure, problem.outcome
    edges = len(graph.arrows)
    print(f"\n{problem.name} graph, {len(graph):,} variables, {edges:,} arrows", flush=True)
    gc.collect()
    some_set = next(iter(problem.candidates.values()))
    made = once(problem.fresh_graph)
    first = once(lambda: identify.is_sufficient(made.result, exposure, outcome, some_set))
    print(f"  making the graph from its arrows: {made}; first question, which indexes it: {first}")
    times.setdefault("first question", []).append((edges, first.seconds))
    for name, members in problem.candidates.items():
        ours = median(lambda: identify.is_sufficient(graph, exposure, outcome, members))  # noqa: B023
        rival = against(name, lambda: median(lambda: problem.separates(members), 3), problem, limit)  # noqa: B023
        line(f"judging {name} ({len(members):,}): {ours.result}", ours, rival)
        allowed = not members & problem.forbidden
        assert not known(rival) or ours.result == (allowed and rival.result), "the two disagree"
        times.setdefault(f"judging {name}", []).append((edges, ours.seconds))
    ours = median(lambda: identify.one_sufficient_set(graph, exposure, outcome), 3)
    rival = against("one minimal set", lambda: once(problem.minimal), problem, limit)
    line(f"one minimal set ({len(ours.result)})", ours, rival)
    agree_on_minimal(problem, ours.result, rival, limit)
    times.setdefault("one minimal set", []).append((edges, ours.seconds))


def against(what: str, work: Callable[[], Timing], problem: Problem, limit: float) -> Timing | None:
    """The rival's timing of some work; None where it was stopped on a smaller graph of the kind already."""
    if (problem.name, what) in GIVEN_UP:
        return None
    outer = limited(work, limit)
    if outer.stopped:
        GIVEN_UP.add((problem.name, what))
        return outer
    return outer.result


def known(rival: Timing | None) -> bool:
    """Whether the rival gave an answer."""
    return rival is not None and not rival.stopped


def line(what: str, ours: Timing, rival: Timing | None) -> None:
    if rival is None:
        print(f"  {what}\n      ours {ours}; networkx was stopped on a smaller graph already", flush=True)
        return
    print(f"  {what}\n      ours {ours}, networkx {rival}: {ratio(rival, ours)}", flush=True)


def agree_on_minimal(problem: Problem, ours: frozenset[str], rival: Timing | None, limit: float) -> None:
    """Each must accept the other's set, and none of our members may be superfluous, as far as time allows."""
    assert not ours & problem.forbidden
    if known(rival):
        assert identify.is_sufficient(problem.graph, problem.exposure, problem.outcome, rival.result)
    accepted = limited(lambda: problem.separates(ours), limit)
    needless = limited(lambda: [name for name in sorted(ours) if problem.separates(ours - {name})], limit)
    assert accepted.stopped or accepted.result, "networkx does not accept our set"
    assert needless.stopped or not needless.result, f"networkx finds {needless.result} superfluous"
    words = ["accepts it", "finds no member superfluous"]
    checked = [word for word, timing in zip(words, (accepted, needless), strict=True) if not timing.stopped]
    print(f"      networkx {' and '.join(checked) or 'could not check it within the limit'}", flush=True)


def slopes(times: Times) -> None:
    """Print how our time grows with the number of arrows."""
    for what, points in times.items():
        if len(points) > 1:
            edges, seconds = np.log(np.array(points, dtype=float)).T
            print(f"  growth of {what}: time ~ arrows ** {np.polyfit(edges, seconds, 1)[0]:.2f}")


def listing(length: int, limit: float) -> None:
    """List all minimal sets of a graph that has ``length`` of them (a power of ten)."""
    paths = round(math.log10(length))
    graph = ladder(paths)
    print(f"\n{10**paths:,} minimal sets among {len(graph) - 2} covariates", flush=True)

    def stream() -> Iterator[frozenset[str]]:
        return identify.iterate_sufficient_sets(graph, "exposure", "outcome")

    start = once(lambda: next(iter(stream())))
    ours = once(lambda: sum(1 for _ in stream()))
    assert ours.result == 10**paths
    print(f"  ours {ours}, {show(ours.seconds / ours.result)} a set, the first after {start}")
    allocated, resident = peak_memory(stream)
    print(f"  memory while streaming: {allocated:.2f} MB allocated by Python, {resident:.1f} MB more resident")
    rival_listing(graph, paths, ours, limit)


def rival_listing(graph: CausalGraph, largest: int, ours: Timing, limit: float) -> None:
    """Test subsets in order of size with networkx, supersets of sets already found left out.

    The rival is told how large the largest minimal set is and stops there; on its own it could not know.
    It is timed on as many subsets as fit into the limit; where they are not all, its time is extrapolated in
    proportion, which flatters it: sets already found slow down every later subset.
    """
    names = sorted(variable.name for variable in graph if variable.name not in ("exposure", "outcome"))
    cut = graph.to_networkx()
    cut.remove_edge("exposure", "outcome")
    needed = sum(math.comb(len(names), size) for size in range(largest + 1))
    share = until(limit, lambda: subsets_tested(cut, names, largest))
    tested, found, seconds = share
    if tested == needed:
        assert found == ours.result, "the two disagree"
        line("testing subsets one by one", ours, Timing(seconds))
        return
    total = seconds * needed / tested
    print(
        f"  testing subsets one by one: {tested:,} of {needed:,} in {show(seconds)};"
        f" in proportion {show(total)} for all, {total / ours.seconds:,.0f} times ours (extrapolated)",
        flush=True,
    )


def subsets_tested(cut: nx.DiGraph, names: list[str], largest: int) -> Iterator[bool]:
    """For each subset in turn, whether it turned out to be a minimal separator."""
    found: list[set[str]] = []
    for size in range(largest + 1):
        for chosen in map(set, combinations(names, size)):
            is_new = not any(known <= chosen for known in found)
            minimal = is_new and nx.is_d_separator(cut, {"exposure"}, {"outcome"}, chosen)
            if minimal:
                found.append(chosen)
            yield minimal


def until(limit: float, work: Callable[[], Iterator[bool]]) -> tuple[int, int, float]:
    """Run through ``work`` for at most ``limit`` seconds: how many steps, how many true, how many seconds."""
    start, tested, found = time.perf_counter(), 0, 0
    for hit in work():
        tested += 1
        found += hit
        if time.perf_counter() - start > limit:
            break
    return tested, found, time.perf_counter() - start


if __name__ == "__main__":
    main()
