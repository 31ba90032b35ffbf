"""The commands: each takes the parsed options and returns an exit code.

The solver is imported inside the commands that use it, so that listing costs no compiler.
"""

from __future__ import annotations

import json
import signal
import sys
from argparse import Namespace
from collections import Counter
from collections.abc import Iterable, Iterator
from contextlib import closing, contextmanager
from dataclasses import asdict
from pathlib import Path
from typing import TYPE_CHECKING, Any, TypeGuard

from tqdm import tqdm

from orbitsearch import period_law, tables
from orbitsearch.catalog import Catalog
from orbitsearch.catalog_rows import lacks_kind
from orbitsearch.cli.report import complain, counts_text, say, say_json
from orbitsearch.describe import kind_json, law_text, orbit_text, record_text, verdict_text
from orbitsearch.errors import BadRequest, OrbitsearchError
from orbitsearch.orbit import Orbit, Status, Verdict

if TYPE_CHECKING:
    from orbitsearch.search import SearchRequest

__all__ = ["COMMANDS"]

DONE, NO, STOPPED = 0, 1, 130


def _request(options: Namespace) -> SearchRequest:
    from orbitsearch.search import SearchRequest
    from orbitsearch.starts import start_set

    if len(options.grid) > 2:
        raise BadRequest(f"`grid` takes one number or two: {' '.join(map(str, options.grid))}")
    grid = (options.grid[0], options.grid[-1])
    window = tuple(options.window) if options.window else start_set(options.start).window
    return SearchRequest(options.start, window, grid, options.scaled_period)


def search(options: Namespace) -> int:
    """Search a window, file what is found, print counts and a table."""
    from orbitsearch.runs import Filed, Known, Started, run_search
    from orbitsearch.search import TileDone
    from orbitsearch.workers import check_workers

    request = _request(options)
    workers = check_workers(options.workers)
    new, known, counts = {}, set(), {}
    run, state = 0, "finished"
    with _stops_once(), Catalog.open(options.catalog) as catalog:
        # `disable=None`: no bar where standard error is not a terminal.
        bar = tqdm(total=request.tiles, unit="tile", file=sys.stderr, disable=None)
        bar.set_description("compiling, the first time" if _is_cold() else "searching")
        try:
            with closing(run_search(catalog, request, workers=workers)) as events:
                for event in events:
                    if isinstance(event, TileDone):
                        bar.update()
                        bar.set_description("searching" if bar.n < request.tiles else "verifying")
                    elif isinstance(event, Filed):
                        if event.new:
                            new[event.id] = event.orbit
                        elif event.id not in new:
                            known.add(event.id)
                    elif isinstance(event, Known):
                        known.add(event.id)
                    elif isinstance(event, Started):
                        run = event.run
                    bar.set_postfix(new=len(new), known=len(known), refresh=False)
        except KeyboardInterrupt:
            state = "stopped"
        bar.close()
        if state == "stopped":
            # The signal may have come between filing an orbit and telling of it.
            new |= {record.id: record.orbit for record in catalog.orbits() if record.run_id == run}
        records = sorted(
            (catalog.get(id) for id in new), key=lambda record: record.orbit.scaled_period
        )
        counts = next((one.counts or {} for one in catalog.runs() if one.id == run), {})
    if options.json:
        say_json(
            {
                "run": run, "state": state, "request": request.to_json(), "counts": counts,
                "new": sorted(new), "known": sorted(known),
            }
        )  # fmt: skip
    else:
        say(counts_text(counts))
        if records:
            say("\n" + tables.to_text(records))
        say(f"\n{len(new)} new, {len(known)} known orbits; catalogue {options.catalog}, run {run}")
    if state == "stopped":
        complain(f"stopped; the {len(new)} orbits found so far are kept in {options.catalog}")
        return STOPPED
    return DONE


@contextmanager
def _stops_once() -> Iterator[None]:
    """The first Ctrl-C stops; a second one, impatient, would only interrupt the tidying up.

    A batch system that ends a job asks first, by SIGTERM, and is answered alike.  Who was stopped
    is about to end and stays deaf until then; `orbitsearch.cli.main` lets others listen again.
    """
    numbers = (signal.SIGINT, signal.SIGTERM)
    before = {number: signal.getsignal(number) for number in numbers}
    stopped = False

    def stop(*_: object) -> None:
        nonlocal stopped
        stopped = True
        for number in numbers:
            signal.signal(number, signal.SIG_IGN)
        raise KeyboardInterrupt

    for number in numbers:
        signal.signal(number, stop)
    try:
        yield
    finally:
        if not stopped:
            for number, handler in before.items():
                signal.signal(number, handler)


def _is_cold() -> bool:
    """Whether the kernels still have to be compiled on this machine."""
    from orbitsearch.flow import is_compiled

    return not is_compiled()


def refine(options: Namespace) -> int:
    """Refine a guess; file it on request."""
    from orbitsearch.refine import refine as refine_guess

    answer = refine_guess(options.start, options.at[0], options.at[1], options.period)
    kept = None
    orbit = answer.orbit
    if options.keep and answer.asked_for is not None:
        with Catalog.open(options.catalog) as catalog:
            kept = catalog.add(answer.asked_for)
    if options.json:
        solution = {"status": str(answer.solution.status), "reason": answer.solution.reason}
        value: dict[str, Any] = {"status": str(answer.status), "solution": solution}
        if orbit is not None:
            value = orbit.to_json()
        value |= {"message": answer.message, "elsewhere": answer.elsewhere}
        if kept is not None:
            value |= {"id": kept.id, "new": kept.new}
        say_json(value)
    else:
        if orbit is not None:
            say(orbit_text(orbit))
        say(answer.message)
        if kept is not None:
            say(f"{'filed as' if kept.new else 'already filed as'} orbit {kept.id}")
        elif options.keep:
            advice = "; refine from the numbers above to keep that orbit" if orbit else ""
            say(f"not filed{advice}")
    return NO if answer.asked_for is None else DONE


def verify(options: Namespace) -> int:
    """Verify a filed orbit, or numbers as they are given."""
    from orbitsearch.refine import verify_as_given

    guess = (options.start, options.at, options.period)
    fills = False
    if (options.id is None) == all(part is None for part in guess):
        raise BadRequest("`verify` takes a number ID, or `--start`, `--at` and `--period`")
    if options.id is None:
        if None in guess:
            raise BadRequest("`verify` needs all of `--start`, `--at` and `--period`")
        found = verify_as_given(options.start, options.at[0], options.at[1], options.period)
    else:
        with Catalog.open(options.catalog, create=False) as catalog:
            filed = catalog.get(options.id).orbit
            start = filed.start
            found = verify_as_given(start.kind, start.p, start.q, float(start.period))
            if lacks_kind(filed) and not catalog.read_only and _may_be_filed(found):
                catalog.add(found)
                fills = True
    if isinstance(found, Orbit):
        value, text, status = found.to_json(), orbit_text(found), found.status
    else:
        value = {"status": str(found.status), "reason": found.reason}
        text, status = verdict_text(found), found.status
    if options.json:
        say_json(value if options.id is None else {"id": options.id, **value})
    else:
        say(text)
        if fills:
            say("an early version had filed the orbit without its type; that is filled in now")
        if (
            options.id is None
            and isinstance(found, Orbit)
            and [found.start.p, found.start.q] != guess[1]
        ):
            say("the numbers given were brought to standard form")
    return DONE if status is Status.VERIFIED else NO


def _may_be_filed(found: Orbit | Verdict) -> TypeGuard[Orbit]:
    return isinstance(found, Orbit) and found.status in (Status.VERIFIED, Status.NOT_CONFIRMED)


def list_orbits(options: Namespace) -> int:
    """List filed orbits that meet the options."""
    if options.start is not None:
        from orbitsearch.starts import start_set

        start_set(options.start)
    with Catalog.open(options.catalog, create=False) as catalog:
        records = catalog.orbits(
            start=options.start,
            stable=True if options.stable else None,
            max_scaled_period=options.max_scaled_period,
            word=options.word,
            braid=options.braid,
            symmetry=options.symmetry,
        )
        if options.json:
            say(tables.to_json(records))
        else:
            found = [*records]
            say(tables.to_text(found) if found else "no orbits")
    return DONE


def list_kinds(options: Namespace) -> int:
    """Group the filed orbits by braid type, and hold their words against the law of periods."""
    with Catalog.open(options.catalog, create=False) as catalog:
        found = catalog.kinds()
        untyped = catalog.untyped()
        lengths = catalog.word_lengths("collinear")
    law = period_law.summary(lengths)
    if options.json:
        kinds = [kind_json(kind) for kind in found]
        say_json({"kinds": kinds, "untyped": untyped, "period_law": asdict(law)})
        return DONE
    say(tables.kinds_to_text(found) if found else "no orbits")
    if found:
        say("\n" + law_text(law))
    if untyped:
        say(
            f"\n{len(untyped)} orbits filed by an early version have no type yet: a search that"
            f" meets them fills it in, and so does `orbitsearch verify {untyped[0]}` for one"
        )
    return DONE


def show(options: Namespace) -> int:
    """Show one filed orbit."""
    with Catalog.open(options.catalog, create=False) as catalog:
        record = catalog.get(options.id)
    if options.json:
        say_json(json.loads(tables.to_json([record]))[0])
    else:
        say(record_text(record))
    return DONE


def export(options: Namespace) -> int:
    """Write the whole catalogue as a table."""
    write: dict[str, Any] = {
        "csv": tables.to_csv,
        "json": tables.to_json,
        "latex": tables.to_latex,
    }
    with Catalog.open(options.catalog, create=False) as catalog:
        records = [*catalog.orbits()]
    text = write[options.format](records)
    if options.output is not None:
        _write(options.output, text)
    if options.json:
        path = None if options.output is None else str(options.output)
        value = {"format": options.format, "orbits": len(records), "output": path}
        say_json(value if options.output is not None else {**value, "text": text})
    elif options.output is None:
        say(text.rstrip("\n"))
    else:
        say(f"{len(records)} orbits written to {options.output}")
    return DONE


def _write(path: Path, text: str) -> None:
    try:
        path.write_text(text if text.endswith("\n") else f"{text}\n", encoding="utf-8")
    except OSError as problem:
        reason = problem.strerror or str(problem)
        raise OrbitsearchError(
            f"`output` must be a file that can be written: {path}: {reason}; name another"
        ) from None


def figure(options: Namespace) -> int:
    """Write a page on one filed orbit."""
    try:
        from orbitsearch.plots import figure_page
    except ImportError as problem:
        raise OrbitsearchError(str(problem)) from None

    with Catalog.open(options.catalog, create=False) as catalog:
        record = catalog.get(options.id)
    _write(options.output, figure_page(record, record_text(record)))
    if options.json:
        say_json({"id": record.id, "output": str(options.output)})
    else:
        say(f"orbit {record.id} written to {options.output}")
    return DONE


def lab(options: Namespace) -> int:
    """Open the notebooks in JupyterLab, until it is closed."""
    from orbitsearch.lab.launch import start_lab

    return start_lab(
        options.folder, open_browser=not options.no_browser, port=options.port, say=say
    )


def import_table(options: Namespace) -> int:
    """Refine and file the rows of a published table."""
    from orbitsearch.runs import ImportedRow, import_rows

    if not options.source.strip():
        raise BadRequest("`source` must not be empty; name the publication of the table")
    rows = tables.read_starts_csv(options.file)
    done: Iterable[ImportedRow]
    results = []
    with Catalog.open(options.catalog) as catalog:
        done = import_rows(catalog, rows, options.source)
        for one in tqdm(done, total=len(rows), unit="row", file=sys.stderr, disable=None):
            results.append(one)
            if not options.json:
                say(_row_text(one))
    failed = sum(one.id is None for one in results)
    if options.json:
        say_json(
            [
                {
                    "line": one.row.line, "label": one.row.label, "start": one.row.start,
                    "parameters": [one.row.p, one.row.q], "period": one.row.period,
                    "status": str(one.status), "id": one.id, "new": one.new,
                    "message": one.message,
                }
                for one in results
            ]
        )  # fmt: skip
    else:
        say(
            f"{len(results) - failed} rows filed ({sum(one.new for one in results)} new orbits),"
            f" {failed} failed"
        )
    return NO if failed else DONE


def _row_text(one: Any) -> str:
    name = one.row.label or f"{one.row.start} {one.row.p} {one.row.q}"
    where = "failed" if one.id is None else f"orbit {one.id}{' (new)' if one.new else ''}"
    return f"line {one.row.line}, {name}: {where}: {one.message}"


def runs(options: Namespace) -> int:
    """List the searches filed in the catalogue."""
    with Catalog.open(options.catalog, create=False) as catalog:
        found = catalog.runs()
        filed = Counter(record.run_id for record in catalog.orbits())
    if options.json:
        say_json(
            [
                {
                    "id": run.id, "state": run.state, "started": run.started,
                    "finished": run.finished, "tool_version": run.tool_version,
                    "request": run.request, "counts": run.counts,
                }
                for run in found
            ]
        )  # fmt: skip
    else:
        for run in found:
            ask = run.request
            state = "running or killed" if run.state == "running" else run.state
            say(
                f"run {run.id} {state} {run.started}: {ask['start']} {ask['window']},"
                f" grid {ask['grid']}, T* < {ask['scaled_period']:g}; {filed[run.id]} orbits filed"
            )
    return DONE


def starts(options: Namespace) -> int:
    """Describe the start sets."""
    from inspect import getdoc, getmodule

    from orbitsearch.starts import START_SETS

    described: dict[str, dict[str, Any]] = {
        name: {
            "parameters": [*one.letters],
            "window": [*one.window],
            "description": " ".join((getdoc(getmodule(type(one))) or "").split()),
        }
        for name, one in START_SETS.items()
    }
    if options.json:
        say_json(described)
    else:
        for name, one in described.items():
            window = " ".join(f"{value:g}" for value in one["window"])
            say(f"{name}  ({', '.join(one['parameters'])}), default window {window}")
            say(f"  {one['description']}\n")
    return DONE


COMMANDS = {
    "search": search,
    "refine": refine,
    "verify": verify,
    "list": list_orbits,
    "kinds": list_kinds,
    "show": show,
    "export": export,
    "figure": figure,
    "lab": lab,
    "import": import_table,
    "runs": runs,
    "starts": starts,
}
"""What each command does."""
