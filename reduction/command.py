"""The command line `motescale`: arguments in, one message and an exit status out."""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable, Sequence
from pathlib import Path

from reduction.errors import ReductionError

CAUTION = (
    "Kilovolts can injure or kill, laser light can blind, fine organic powder can burn and be inhaled. Local rules and "
    "qualified staff come first."
)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="motescale",
        description="Charge-to-mass ratio, mass and charge of single trapped particles, from laboratory logs.",
        epilog=CAUTION,
    )
    parser.add_argument("--version", action="store_true", help="print the version and end")
    parser.add_argument("--traceback", action="store_true", help=argparse.SUPPRESS)
    commands = parser.add_subparsers(dest="command", metavar="COMMAND")

    def command(name: str, run: Callable[[argparse.Namespace], int], about: str) -> argparse.ArgumentParser:
        made = commands.add_parser(name, help=about, description=about[0].upper() + about[1:] + ".", epilog=CAUTION)
        made.set_defaults(run=run)
        return made

    one = command("check", _check, "find every fault in a campaign, and how each of its files is read")
    one.add_argument("campaign", type=Path, help="folder that holds campaign.yaml and sessions/")

    one = command("run", _run, "reduce a campaign to tables and reports, as far as anything changed")
    one.add_argument("campaign", type=Path, help="folder that holds campaign.yaml and sessions/")
    one.add_argument("results", type=Path, help="folder for the results; made where it is not there")
    one.add_argument("--cores", type=_cores, help="how many processor cores to use (all)")
    loudness = one.add_mutually_exclusive_group()
    loudness.add_argument("--quiet", action="store_true", help="print nothing but errors")
    loudness.add_argument("--verbose", action="store_true", help="print what the workflow says too")

    one = command("new", _new, "write an empty campaign with commented files")
    one.add_argument("campaign", type=Path, help="folder to write")

    one = command("session", _session, "add a session to a campaign, set up like another")
    one.add_argument("campaign", type=Path, help="folder that holds campaign.yaml and sessions/")
    one.add_argument("session", help="id of the new session")
    one.add_argument("--like", metavar="OTHER", help="session whose settings are taken over")

    one = command("simulate", _simulate, "write a campaign of known truth, for planning, teaching and tests")
    one.add_argument("campaign", type=Path, help="folder to write; the truth is written beside it")
    one.add_argument("--plan", metavar="NAME", help="what to simulate (room_air_light)")
    one.add_argument("--plans", action="store_true", help="list the plans there are and end")
    one.add_argument("--course", action="store_true", help="a course to mark: benches with claims and known mistakes")
    one.add_argument("--materials", metavar="A,B", help="materials the particles are charged with, taken in turn")
    one.add_argument("--sessions", type=int, help="number of sessions")
    one.add_argument("--particles", type=int, help="particles in each session")
    one.add_argument("--outliers", type=float, metavar="SHARE", help="share of readings that are grossly wrong")
    one.add_argument("--charge-drift", type=float, metavar="PER_S", help="relative change of charge per second")
    one.add_argument("--seed", type=int, default=1, help="same seed, same campaign (1)")

    one = command("explain", _explain, "tell step by step how one particle's numbers came about")
    one.add_argument("results", type=Path, help="a results folder")
    one.add_argument("session", help="id of the session")
    one.add_argument("particle", help="id of the particle")

    one = command("trap", _trap, "compute the constants of a trap from the drawing of its electrodes")
    one.add_argument("trap", type=Path, metavar="FILE", help="trap file with electrodes, as in traps/ of a campaign")
    one.add_argument("--page", type=Path, metavar="PDF", help="write its page: drawing, field, budget")
    one.add_argument("--results", type=Path, metavar="DIR", help="results folder that keeps what was computed")

    one = command("plan", _plan, "tell how many sessions a difference between two groups takes")
    one.add_argument("results", type=Path, nargs="?", help="a results folder to take spreads from")
    one.add_argument("--difference", type=float, required=True, metavar="D", help="difference that shall be seen")
    one.add_argument("--group", help="group of the results whose spreads to take")
    one.add_argument("--between-sessions", type=float, metavar="SD", help="spread of session means, stated")
    one.add_argument("--between-particles", type=float, metavar="SD", help="spread of particles in a session, stated")
    one.add_argument("--u-particle", type=float, metavar="U", help="u of one particle, its own, stated")
    one.add_argument("--u-session", type=float, metavar="U", help="u that a session's particles share, stated")
    one.add_argument("--u-shared", type=float, metavar="U", help="u that one group shares and the other does not")
    one.add_argument("--power", type=float, default=0.8, help="wanted chance to see the difference (0.8)")
    one.add_argument("--level", type=float, default=0.05, help="level of the test (0.05)")
    one.add_argument("--particles", type=int, help="particles in each session (those of the results, or 20)")
    one.add_argument("--comparisons", type=int, help="pairs of groups tested together (those of the results, or 1)")
    one.add_argument("--trials", type=int, default=2000, help="simulated campaigns for each number tried (2000)")
    one.add_argument("--seed", type=int, default=1, help="same seed, same plan (1)")

    one = command("diff", _diff, "tell two results folders apart: what moved, by how many u, and what did it")
    one.add_argument("a", type=Path, metavar="A", help="a results folder")
    one.add_argument("b", type=Path, metavar="B", help="another one; moves are in units of u in A")
    one.add_argument("--all", action="store_true", help="list every number, not the largest moves alone")

    one = command("pack", _pack, "make the bundle to send to a colleague, without marks, register, logs or paths")
    one.add_argument("results", type=Path, help="a results folder")
    one.add_argument("archive", type=Path, metavar="OUT.zip", help="archive to write")
    one.add_argument("--with-campaign", type=Path, metavar="DIR", help="put in the input files of this campaign, too")
    one.add_argument("--overwrite", action="store_true", help="replace an archive that is there")

    one = command("gradebook", _gradebook, "fill marks into the gradebook that a learning platform exported")
    one.add_argument("results", type=Path, help="a results folder of a marked campaign")
    one.add_argument("export", type=Path, metavar="EXPORT.csv", help="the platform's own exported file; only read")
    one.add_argument("--match", required=True, metavar="COLUMN", help="column of the export that says who a row is")
    one.add_argument("--by", choices=("id_number", "email", "name"), help="column of the register that is meant")
    about = "column of the export to fill with the marks, or with another column of the mark sheet"
    one.add_argument("--fill", required=True, action="append", metavar="COLUMN[=WHAT]", help=about)
    one.add_argument("--decimal", choices=(".", ","), default=".", help="decimal mark of what is filled in (.)")
    one.add_argument("--write", type=Path, metavar="OUT", help="file to write; without it the changes are shown only")

    one = command("verify", _verify, "check that results are those of their run, or one particle by refitting")
    one.add_argument("folder", type=Path, help="a results folder; a campaign with --refit")
    one.add_argument(
        "--campaign", type=Path, metavar="DIR", help="check, too, that these are the inputs of the results"
    )
    one.add_argument("--refit", type=_pair, metavar="SESSION/PARTICLE",
                     help="hold this particle's intervals against refits of simulated readings")  # fmt: skip
    one.add_argument("--trials", type=int, default=400, help="sets of simulated readings, 200 or more (400)")
    one.add_argument("--seed", type=int, default=1, help="same seed, same draws (1)")
    return parser


def _pair(text: str) -> tuple[str, str]:
    session, mark, particle = text.partition("/")
    if not (session and mark and particle):
        message = f"{text} is no SESSION/PARTICLE, as in s001/p01"
        raise argparse.ArgumentTypeError(message)
    return session, particle


def _cores(text: str) -> int:
    if not text.isdecimal() or int(text) < 1:
        message = f"{text} is no number of cores"
        raise argparse.ArgumentTypeError(message)
    return int(text)


def _say(text: str) -> None:
    sys.stdout.write(text.rstrip("\n") + "\n")


def _check(asked: argparse.Namespace) -> int:
    from reduction.steps import check

    _say(check(asked.campaign))
    return 0


def _run(asked: argparse.Namespace) -> int:
    from reduction.running import run

    loudness = "quiet" if asked.quiet else "verbose" if asked.verbose else "normal"
    return run(asked.campaign, asked.results, cores=asked.cores, loudness=loudness)


def _new(asked: argparse.Namespace) -> int:
    from reduction.newcampaign import new_campaign

    new_campaign(asked.campaign)
    _say(f"{asked.campaign} is there. Fill in its files, then: motescale check {asked.campaign}\n{CAUTION}")
    return 0


def _session(asked: argparse.Namespace) -> int:
    from reduction.newcampaign import new_session

    new_session(asked.campaign, asked.session, like=asked.like)
    _say(f"Session {asked.session} is there. Add its logs, then: motescale check {asked.campaign}\n{CAUTION}")
    return 0


def _simulate(asked: argparse.Namespace) -> int:
    from dataclasses import replace

    from reduction.errors import nearest
    from reduction.simulationplan import PLANS

    if asked.plans:
        _say("\n".join(sorted(PLANS)))
        return 0
    if asked.course:
        return _simulate_course(asked)
    asked.plan = asked.plan or "room_air_light"
    if asked.plan not in PLANS:
        message = f"there is no plan {asked.plan}. {nearest(asked.plan, PLANS)}"
        raise ReductionError(message)
    from reduction.simulation import simulate_campaign

    plan = PLANS[asked.plan]
    habits = plan.habits
    if asked.outliers is not None:
        habits = replace(habits, outliers=asked.outliers)
    if asked.charge_drift is not None:
        habits = replace(habits, charge_drift_per_s=asked.charge_drift)
    plan = replace(
        plan,
        habits=habits,
        sessions=plan.sessions if asked.sessions is None else asked.sessions,
        particles=plan.particles if asked.particles is None else asked.particles,
        materials=plan.materials if asked.materials is None else tuple(asked.materials.split(",")),
    )
    truth = simulate_campaign(asked.campaign, plan=plan, seed=asked.seed)
    _say(f"{asked.campaign} is there, invented data of seed {asked.seed}; what is true stands in {truth}")
    return 0


def _simulate_course(asked: argparse.Namespace) -> int:
    from reduction.simulationcourse import mistake_of, simulate_course

    given = [
        f"--{name.replace('_', '-')}"
        for name in ("plan", "materials", "outliers", "charge_drift")
        if getattr(asked, name) is not None
    ]
    if given:
        message = f"found --course with {' and '.join(given)}; a course has a plan of its own. Give one or the other."
        raise ReductionError(message)
    mistakes = [mistake_of(number) for number in range(12 if asked.sessions is None else asked.sessions)]
    particles = 5 if asked.particles is None else asked.particles
    truth = simulate_course(asked.campaign, mistakes=mistakes, seed=asked.seed, particles=particles)
    _say(
        f"{asked.campaign} is there, a course of invented data of seed {asked.seed}; mistakes planted and the marks "
        f"that are fair stand in {truth}"
    )
    return 0


def _explain(asked: argparse.Namespace) -> int:
    from reduction.explain import explain

    _say(explain(asked.results, asked.session, asked.particle))
    return 0


def _trap(asked: argparse.Namespace) -> int:
    from reduction.trapcommand import trap_text

    _say(f"{trap_text(asked.trap, page=asked.page, results=asked.results)}\n{CAUTION}")
    return 0


def _plan(asked: argparse.Namespace) -> int:
    from reduction.sessionsneeded import SPREADS, basis_of, comparison_of, plan_text

    basis = basis_of(comparison_of(asked.results), asked.group) if asked.results is not None else None
    if basis is None and asked.group is not None:
        message = "--group names a group of a results folder; expected RESULTS too"
        raise ReductionError(message)
    stated = {name: value for name in SPREADS if (value := getattr(asked, name)) is not None}
    text = plan_text(
        basis,
        stated,
        difference=asked.difference,
        power=asked.power,
        level=asked.level,
        particles=asked.particles,
        comparisons=asked.comparisons,
        trials=asked.trials,
        seed=asked.seed,
    )
    _say(f"{text}\n{CAUTION}")
    return 0


def _diff(asked: argparse.Namespace) -> int:
    from reduction.diffwords import difference_text
    from reduction.resultsdiff import difference

    try:
        found = difference(asked.a, asked.b)
    except ReductionError as error:
        sys.stderr.write(f"{error}\n")
        return 2  # as 1 says that there is a difference
    _say(difference_text(found, asked.a, asked.b, everything=asked.all))
    return 1 if found else 0


def _pack(asked: argparse.Namespace) -> int:
    from reduction.bundle import pack

    _say(pack(asked.results, asked.archive, campaign=asked.with_campaign, overwrite=asked.overwrite))
    return 0


def _gradebook(asked: argparse.Namespace) -> int:
    from reduction.gradebook import fill, filled_text, fills_of, write_filled

    how = {"match": asked.match, "by": asked.by, "decimal": asked.decimal}
    found = fill(asked.results, asked.export, fills=fills_of(asked.fill), **how)
    if asked.write is not None:
        write_filled(found, asked.export, asked.write)
    _say(filled_text(found, None if asked.write is None else str(asked.write)))
    return 0


def _verify(asked: argparse.Namespace) -> int:
    if asked.refit is None:
        from reduction.checksums import verification

        text, good = verification(asked.folder, asked.campaign)
        _say(text)
        return 0 if good else 3
    if asked.campaign is not None:
        message = "--campaign goes with a results folder; with --refit the folder itself is the campaign"
        raise ReductionError(message)
    from reduction.validation import refit, report_text

    session, particle = asked.refit
    found = refit(asked.folder, session, particle, asked.trials, asked.seed)
    _say(report_text(found))
    return 3 if any(one.comparison.verdict == "fails" for one in found) else 0


def main(argv: Sequence[str] | None = None) -> int:
    """Run one command.

    Returns
    -------
    int
        0 where it did what was asked, 1 where it could not, 2 where it was not asked rightly, 3 where what was verified
        does not hold, 130 where interrupted; of `diff` 0 where there is no difference, 1 where there is one, 2 where it
        could not tell.
    """
    parser = _parser()
    asked = parser.parse_args(argv)
    if asked.version:
        from reduction.digests import versions

        _say(f"motescale {versions()['motescale']}")
        return 0
    if asked.command is None:
        parser.print_help(sys.stderr)
        return 2
    try:
        return int(asked.run(asked))
    except ReductionError as error:
        sys.stderr.write(f"{error}\n")
    except BrokenPipeError:
        sys.stderr.close()  # whoever was reading has gone; nothing is left to be said
    except OSError as error:
        where = f"{error.filename}: " if error.filename else ""
        sys.stderr.write(f"{where}{error.strerror or error}. Look at the folder, its permissions and the space left.\n")
    except KeyboardInterrupt:
        sys.stderr.write("Interrupted. What was finished stays; the same command goes on from there.\n")
        return 130
    except Exception as error:
        if asked.traceback or getattr(asked, "verbose", False):
            raise
        sys.stderr.write(
            f"Stopped by {type(error).__name__}: {error}. This is a fault of the program; please report it with what "
            f"`motescale --traceback {asked.command} ...` prints.\n"
        )
    return 1


if __name__ == "__main__":
    sys.exit(main())
