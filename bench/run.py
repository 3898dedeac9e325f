"""Measure everything, print it, and write RESULTS.md: `python -m bench.run [--all | --quick] [--only SECTION ...]`.

A run is meant to take about twelve minutes on a quiet machine with two cores. With --all the solvers are compared on
every circuit turned up as well, and on every ladder, which takes about twice as long.
A quick run takes fewer circuits, shorter hits and fewer repeats, prints, and writes nothing: its figures are no
results. What stands in RESULTS.md from the heading KEPT on is written by hand and is kept.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable
from dataclasses import dataclass, field, replace
from pathlib import Path

from bench import start, tables
from bench.aliasing import aliasing
from bench.circuits import Case, hard_settings, ladder_cases, shipped_cases
from bench.compare import LENGTHS_S, Comparison, Effort, compare, ratio
from bench.equations import NotCovered
from bench.growth import growth_with_length, growth_with_nets, lanes
from bench.packs import HIT_S, render_hits, render_shipped
from bench.solvers import SCIPY_METHODS
from kickrender.circuit import read_circuit

RESULTS = Path(__file__).resolve().parent / "RESULTS.md"
KEPT = "## What was tried"
VOICE = "bridged-t"  # the circuit the targets speak of
DEMO = "night-ferry"
FULL, QUICK = Effort(), Effort(length_s=0.05, repeats=1)
VOICE_RUN_S = 1.0  # the circuit the targets speak of is compared over longer sounds than the others
LADDER_S = 0.2  # so that a converged solution of 200 nets takes seconds
USUAL_LADDERS = ("ladder of 10", "ladder of 50", "ladder of 200")

Target = tuple[str, str, str, bool | None]


@dataclass
class Report:
    """The text as it grows, and how each target fared."""

    quick: bool
    effort: Effort
    everything: bool = False
    text: list[str] = field(default_factory=list)
    targets: list[Target] = field(default_factory=list)

    def say(self, text: str) -> None:
        """Add to the report, and show at once."""
        print(text, flush=True)
        self.text.append(text)

    def target(self, name: str, wanted: str, measured: float | None, shown: str, reached: bool) -> None:
        """Record one target."""
        self.targets.append((name, wanted, shown, reached if measured is not None else None))

    @property
    def repeats(self) -> int:
        """Runs of which the median is taken."""
        return self.effort.repeats


def solver_section(report: Report) -> None:
    """Every solver on every circuit."""
    cases = [*shipped_cases(), *ladder_cases()]
    if report.quick:
        cases = [case for case in cases if case.name in (VOICE, "ladder of 10", "ladder of 50")]
    elif not report.everything:
        cases = [case for case in cases if _is_usual(case.name)]
    report.say(f"## Beside general-purpose solvers\n\n{_solvers_text(report.effort)}")
    found: list[Comparison] = []
    for case in cases:
        print(f"... {case.name}", file=sys.stderr, flush=True)
        try:
            found.append(compare(case, _effort(report, case.name)))
        except NotCovered as kinds:
            report.say(f"{case.name} is left out: no compiled equations for {kinds}.\n")
    report.say(tables.comparison_tables(found))
    _solver_targets(report, found)


def _is_usual(name: str) -> bool:
    """Whether a case is compared without being asked for: what differs most, in the time that a run may take."""
    return name == f"{VOICE}, hard" or name in USUAL_LADDERS or not name.endswith(", hard") and "ladder" not in name


def _effort(report: Report, name: str) -> Effort:
    if report.quick:
        return report.effort
    if "ladder" in name:
        return replace(report.effort, length_s=LADDER_S)
    return replace(report.effort, run_s=VOICE_RUN_S) if name.removesuffix(", hard") == VOICE else report.effort


def _solver_targets(report: Report, found: list[Comparison]) -> None:
    for comparison in found:
        if comparison.case.removesuffix(", hard") != VOICE:
            continue
        for who, names, wanted in (("SUNDIALS IDA", ("IDA",), 80.0), ("SciPy's best", SCIPY_METHODS, 120.0)):
            entries = [entry for entry in comparison.entries if entry.name in names]
            for way in ("own", "joined"):
                shown = tables.least_ratio(entries, way == "own")
                ratios = [ratio(getattr(entry, way), entry.engine) for entry in entries]
                least = min((r for r in ratios if r is not None), default=None)
                name = f"{comparison.case}: {who}, {'its own dense output' if way == 'own' else 'steps joined by us'}"
                report.target(name, f"{wanted:g}x", least, shown, least is not None and least >= wanted)


def _solvers_text(effort: Effort) -> str:
    return _SOLVERS.format(e=effort, voice=VOICE, voice_s=VOICE_RUN_S, least_s=min(LENGTHS_S))


_SOLVERS = """\
Up to {e.length_s:g} s of sound in dense samples at {e.rate_hz:g} Hz, one core, from rest state to samples (the
competitors are given the rest state). Every solver runs at the loosest tolerance, on a sweep by half decades from 1e-4,
whose residual is at -100 dB or lower: RMS difference over peak, against the engine at 1e-10. The competitors solve
equations written independently of the engine's (those of the tests), compiled, in the quickest matrix form they offer,
restarted at every corner of the inputs. SciPy's need an invertible mass matrix, which 1 pF at massless nets gives them;
they are measured against that circuit's own solution.

A competitor is measured over as long a sound as it should take {e.run_s:g} s for ({voice_s:g} s for {voice}), going by
short trials, from the strike on and for {least_s:g} s at least; the column "sound" says how long. Ratios are to the
engine over the same length at the same accuracy, whose time is in the last column. A measurement, which is a whole
sweep over the tolerances, is stopped after {e.limit_s:g} s and says so.

- Jacobian: compiled and handed over, or left to the solver's own finite differences of the compiled equations.
- own: the solver is asked for every sample, the ordinary use. Left out above 60 unknowns, where it fills gigabytes.
- joined: its bare steps, joined by a compiled cubic of ours; what its stepping alone costs.
- as shipped: at the default tolerance; side by side: the same per hit, 32 hits in lanes.
- IDA tight: residual of IDA at 1e-10, which shows that the converged solution is right; 1 pF: what the masses change.
"""


_PACKS = """\
From pack file to manifest and sheets; Python's start is left out, files are not waited for. A worker is a process
that renders: with one job, or few hits, the pack's own process is it. The parent is the process that gives out batches;
its memory is told when every hit is there, and again after manifest and sheets, which hold a little of every hit.
"""


def growth_section(report: Report) -> None:
    """Growth with nets and length, and lanes."""
    report.say("## Growth\n\nThe solve alone, nothing sampled, at the default tolerance.\n")
    cases = ladder_cases()
    by_nets = growth_with_nets(cases, report.effort.length_s, report.repeats)
    rows = [[c.name, str(steps), tables.ms(s), f"{1e6 * s / steps:.2f}"] for c, s, steps in by_nets]
    report.say(tables.table(["circuit", "steps", "ms", "us per step"], rows))
    sizes = [float(case.name.split()[-1]) for case in cases]
    power = tables.exponent(sizes, [s for _, s, _ in by_nets])
    report.say(f"Cost grows as nets^{power:.2f}.\n")
    report.target("ladders: cost grows as nets^p", "p <= 1.3", power, f"{power:.2f}", power <= 1.3)

    voice = read_circuit(VOICE)
    by_length = growth_with_length(voice.resolve(hard_settings(voice)), report.repeats)
    rows = [[f"{length:g} s", str(steps), tables.ms(s), tables.ms(s / length)] for length, s, steps in by_length]
    report.say(tables.table([f"{VOICE}, hard", "steps", "ms", "ms per second"], rows))

    rows = []
    for name, settings in ((VOICE, {}), (f"{VOICE}, hard", hard_settings(voice))):
        found = lanes(voice, settings, "pitch", report.effort.length_s, report.repeats)
        share = found.lane_s / found.lone_s
        rows.append([name, tables.ms(found.lone_s), tables.ms(found.lane_s), f"{share:.2f}"])
        report.target(f"{name}: solve side by side over alone", "<= 0.45", share, f"{share:.2f}", share <= 0.45)
    report.say(
        tables.table(["32 hits over the pitch control", "alone [ms/hit]", "side by side [ms/hit]", "share"], rows)
    )


def pack_section(report: Report) -> None:
    """Whole packs."""
    counts = (64, 128) if report.quick else (100, 1000, 5000)
    report.say(f"## Whole packs\n\n{_PACKS}")
    runs = [(DEMO, render_shipped(DEMO, jobs)) for jobs in (1, 2)]
    for count in counts:
        print(f"... {count} hits", file=sys.stderr, flush=True)
        runs += [(f"{count} hits of {HIT_S:g} s", render_hits(VOICE, count, jobs)) for jobs in (1, 2)]
    report.say(tables.pack_table(runs))
    spread = [run for name, run in runs if name != DEMO and run.worker_mb is not None]
    largest = max(run.worker_mb or 0.0 for run in spread)
    report.target("memory of a worker", "< 350 MB", largest, f"{largest:.0f} MB", largest < 350)
    for who, peaks in (("worker", [run.worker_mb or 0.0 for run in spread]), ("parent", [r.parent_mb for r in spread])):
        rise = peaks[-1] - peaks[0]
        shown = f"{rise:+.0f} MB from {counts[0]} to {counts[-1]} hits"
        report.target(f"memory of a {who}, flat in the number of hits", "< 50 MB more", rise, shown, rise < 50)
    one, two = (run for _, run in runs[-2:])
    gain = one.seconds / two.seconds
    report.target(f"{counts[-1]} hits: one worker's time over two's", ">= 1.6", gain, f"{gain:.2f}", gain >= 1.6)

    run = render_shipped(DEMO, 1, stages=True)
    report.say(f"Where one worker's time goes in {DEMO}:\n\n{tables.stage_table(run)}")
    # What is done over the whole pack, once its files are there, is no hit's: it is told apart.
    hits_s = run.seconds - sum(run.stages[stage] for stage in ("duplicates", "manifest", "sheets"))
    file_s = run.stages["measure"] + run.stages["write"]
    finished_s = file_s + run.stages["level and finish"]
    report.say(
        f"A hit, without search for duplicates, manifest and sheets, costs {hits_s / finished_s:.2f} times what its\n"
        f"samples cost from measuring to the file, and {hits_s / file_s:.2f} times measuring and writing without level "
        "and finish\nbetween.\n"
    )
    share = hits_s / finished_s
    report.target("whole hit over measuring to file", "<= 2.5", share, f"{share:.2f}", share <= 2.5)


def start_section(report: Report) -> None:
    """The command line's own waits."""
    report.say("## Starting\n")
    repeats = min(5, report.repeats)
    rows: list[list[str]] = []

    def row(name: str, wanted_s: float, found_s: float) -> None:
        rows.append([name, f"{found_s:.2f}"])
        report.target(name, f"< {wanted_s:g} s", found_s, f"{found_s:.2f} s", found_s < wanted_s)

    row("`kickrender --help`", 0.3, start.help_s(repeats))
    row(f"`kickrender render {VOICE}`, warm", 1.5, start.render_s(VOICE, repeats))
    if not report.quick:
        row(f"`kickrender render {VOICE}`, nothing compiled", 40.0, start.first_render_s(VOICE))
    report.say(tables.table(["command", "seconds"], rows))


def aliasing_section(report: Report) -> None:
    """What folds back."""
    report.say("## Aliasing\n\nThe default oversampling against one eight times finer.\n")
    cases: list[Case] = [case for case in shipped_cases() if not report.quick or case.name.startswith(VOICE)]
    found = [(case.name, aliasing(case.circuit, report.effort.length_s)) for case in cases]
    report.say(tables.aliasing_table(found))
    worst = max(a.whole_db for _, a in found)
    report.target("default against finer settings, worst", "< -90 dB", worst, f"{worst:.1f} dB", worst < -90.0)


SECTIONS: dict[str, Callable[[Report], None]] = {
    "solvers": solver_section,
    "growth": growth_section,
    "packs": pack_section,
    "start": start_section,
    "aliasing": aliasing_section,
}


def run(sections: list[str], *, quick: bool, everything: bool = False) -> Report:
    """Measure the sections and print them."""
    report = Report(quick, QUICK if quick else FULL, everything)
    for name in sections:
        SECTIONS[name](report)
    report.say("## Targets\n")
    report.say(tables.target_table(report.targets))
    return report


def main(arguments: list[str]) -> None:
    """The command."""
    parser = argparse.ArgumentParser(prog="python -m bench.run", description=__doc__)
    parser.add_argument("--quick", action="store_true", help="print only, with less of everything")
    parser.add_argument("--all", action="store_true", help="compare on every circuit, turned up too, and every ladder")
    parser.add_argument("--only", nargs="+", choices=SECTIONS, help="print these sections only")
    chosen = parser.parse_args(arguments)
    command = " ".join(["python -m bench.run", *arguments])
    head = f"# Results\n\n{tables.machine(command)}"
    print(head)
    report = run(chosen.only or list(SECTIONS), quick=chosen.quick, everything=chosen.all)
    if not chosen.quick and not chosen.only:
        RESULTS.write_text("\n".join([head, *report.text, _kept()]).rstrip() + "\n", encoding="utf-8")


def _kept() -> str:
    before = RESULTS.read_text(encoding="utf-8") if RESULTS.exists() else ""
    return before[before.index(KEPT) :] if KEPT in before else ""


if __name__ == "__main__":
    main(sys.argv[1:])
