"""The command line, thin: each command reads its words, calls the pipeline and prints what it gives.

Exit codes: 0 all made and nothing faulty; 1 something failed or faulty; 2 the graph or the call is wrong.
Nothing heavy is imported until a command needs it, so `--help` starts at once.
"""

from __future__ import annotations

import argparse
import os
import sys
import time
from pathlib import Path
from typing import TYPE_CHECKING, Any

if TYPE_CHECKING:
    from tangentry.pipeline.graph import Graph
    from tangentry.pipeline.record import Record

CAUTION = (
    "Building a graph runs the code of its node kinds, those of its own `kinds:` folder included: "
    "build graphs you trust."
)
MOST_PROBLEMS = 30  # that are printed


def main(words: list[str] | None = None) -> int:
    """Run one command; gives its exit code."""
    chosen = _parser().parse_args(words)
    from tangentry.pipeline.errors import GraphError, TangentryError

    try:
        return int(chosen.run(chosen))
    except GraphError as error:
        _print_problems(error.problems)
        return 2
    except TangentryError as error:
        print(error, file=sys.stderr)
        return 1
    except KeyboardInterrupt:
        from tangentry.pipeline.interrupts import EXIT_CODE, TOLD

        print(TOLD, file=sys.stderr)
        return EXIT_CODE
    except BrokenPipeError:  # whoever read our output has enough
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1


def _print_problems(problems: tuple[str, ...]) -> None:
    print("\n".join(problems[:MOST_PROBLEMS]), file=sys.stderr)
    if len(problems) > MOST_PROBLEMS:
        print(f"and {len(problems) - MOST_PROBLEMS} more", file=sys.stderr)


def _parser() -> argparse.ArgumentParser:
    parser = argparse.ArgumentParser(
        prog="tangentry",
        description="Takes a library of normal-mapped meshes from authoring export to delivered file, and rebuilds "
        "only what changed.",
        epilog=CAUTION,
    )
    parser.add_argument("--version", action="version", version=_Version())
    commands = parser.add_subparsers(metavar="COMMAND", required=True)
    _build_words(commands.add_parser("build", help="make everything that is out of date", epilog=CAUTION))
    _plan_words(commands.add_parser("plan", help="what would run and why, touching nothing", epilog=CAUTION))
    _draw_words(commands.add_parser("draw", help="the graph as a picture, with the last build's state"))
    _nodes_words(commands.add_parser("nodes", help="the node reference"))
    _inspect_words(commands.add_parser("inspect", help="facts about meshes and maps"))
    _store_words(commands.add_parser("store", help="look after the store"))
    _start_words(commands.add_parser("start", help="write a small working project to begin from"))
    return parser


class _Version(str):
    """Looked up only when it is asked for."""

    def __mod__(self, _: object) -> str:
        from importlib.metadata import version

        return f"tangentry {version('tangentry')}"


def _graph_words(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("graph", metavar="GRAPH", help="a graph file (YAML)")
    parser.add_argument("--asset", metavar="PATTERN", help="only the assets whose name or stem matches")
    parser.add_argument(
        "--set", metavar="NAME=VALUE", action="append", default=[], help="set an option of the graph; may be repeated"
    )
    parser.add_argument(
        "--store",
        metavar="DIR",
        help="folder of the store, or an fsspec URL (default: .tangentry beside the graph file)",
    )


def _read(chosen: argparse.Namespace) -> Graph:
    from tangentry.pipeline.errors import GraphError
    from tangentry.pipeline.graph import option_from_text, read_graph

    sets = {}
    for word in chosen.set:
        name, equals, value = word.partition("=")
        if not equals:
            raise GraphError(f"--set {word}: write --set NAME=VALUE")
        sets[name] = option_from_text(value)
    return read_graph(chosen.graph, sets)


def _write(file: str, content: bytes) -> None:
    from tangentry.pipeline.writing import write_whole

    write_whole(Path(file), lambda opened: opened.write(content))


# build


def _build_words(parser: argparse.ArgumentParser) -> None:
    _graph_words(parser)
    parser.add_argument("--workers", metavar="N", type=_count, default=1, help="processes to build with (default: 1)")
    parser.add_argument(
        "--cluster", metavar="ADDRESS", help="build on the workers of the Dask scheduler at this address"
    )
    going = parser.add_mutually_exclusive_group()
    going.add_argument("--keep-going", action="store_true", help="build all other assets when one fails (the default)")
    going.add_argument("--stop-at-first", action="store_true", help="stop when an asset fails")
    parser.add_argument("--watch", action="store_true", help="build again at every save, until interrupted")
    parser.add_argument("--record", metavar="FILE", help="write what happened as JSON")
    parser.add_argument("--overwrite", action="store_true", help="replace files that this graph did not write")
    parser.add_argument("--tidy", action="store_true", help="remove files this graph wrote and makes no longer")
    parser.set_defaults(run=_build)


def _count(text: str) -> int:
    if not text.isdigit() or int(text) < 1:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number of processes; write 1 or more")
    return int(text)


def _build(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.seal import Word, seal, store_place, unbroken

    store, _ = store_place(Path(chosen.graph), chosen.store)
    asked = [os.path.abspath(chosen.graph), chosen.store or "", chosen.asset or "", *chosen.set]
    word = None if chosen.tidy or chosen.overwrite or chosen.watch else unbroken(store, asked)
    if word is not None:
        if chosen.record:
            _write(chosen.record, word.record)
        print(word.text)
        return word.code
    began = time.time()
    record, code = _build_once(chosen)
    if record.lasting:
        from tangentry.pipeline.terminal import told_again

        again = record.unchanged().text().encode()
        seal(store, asked, record.rests_on, Word("\n".join(told_again(record)), code, again))
    return _watch(chosen, record, store, began) if chosen.watch else code


def _build_once(chosen: argparse.Namespace) -> tuple[Record, int]:
    from tangentry.pipeline.build import run_build
    from tangentry.pipeline.interrupts import heard_at_once
    from tangentry.pipeline.terminal import Progress, closing_lines

    graph = _read(chosen)
    with Progress() as progress, heard_at_once():
        record = run_build(
            graph,
            store=chosen.store,
            only=chosen.asset,
            workers=chosen.workers,
            cluster=chosen.cluster or "",
            stop_at_first=chosen.stop_at_first,
            overwrite=chosen.overwrite,
            tidy=chosen.tidy,
            listener=progress.asset,
        )
    if chosen.record:
        _write(chosen.record, record.text().encode())
    print("\n".join(closing_lines(record)), flush=True)
    return record, 0 if record.sound else 1


def _watch(chosen: argparse.Namespace, record: Record, store: Path, began: float) -> int:
    """Build again at every save, until interrupted; a graph that is wrong for the moment is waited for."""
    from tangentry.pipeline.errors import GraphError
    from tangentry.pipeline.watch import wait_for_saves

    folder = Path(chosen.graph).parent
    while True:
        outputs = [folder / path for one in [*record.assets, record.library] for path in one.outputs]
        saved = wait_for_saves(record.rests_on, outputs, store, began)
        named = ", ".join(os.path.relpath(path) for path in saved[:4])
        print(f"\nsaved: {named}{' ...' if len(saved) > 4 else ''}", flush=True)
        began = time.time()
        try:
            record, _ = _build_once(chosen)
        except GraphError as error:
            _print_problems(error.problems)


# plan


def _plan_words(parser: argparse.ArgumentParser) -> None:
    _graph_words(parser)
    parser.add_argument("--json", action="store_true", help="as JSON")
    parser.set_defaults(run=_plan)


def _plan(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.build import make_plan
    from tangentry.pipeline.terminal import plan_json, plan_lines

    planned = make_plan(_read(chosen), chosen.store, chosen.asset)
    print(plan_json(planned) if chosen.json else "\n".join(plan_lines(planned)))
    return 0


# draw


def _draw_words(parser: argparse.ArgumentParser) -> None:
    _graph_words(parser)
    parser.add_argument("-o", "--output", metavar="FILE", required=True, help="the picture to write (SVG)")
    parser.set_defaults(run=_draw)


def _draw(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.build import read_last_record
    from tangentry.pipeline.draw import draw

    graph = _read(chosen)
    picture = draw(graph, read_last_record(graph, chosen.store))
    _write(chosen.output, picture.encode())
    print(f"drawn     {chosen.output}")
    return 0


# nodes


def _nodes_words(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("kind", metavar="KIND", nargs="?", help="one kind, in full")
    parser.add_argument("--kinds", metavar="DIR", help="a project's own folder of node kinds, too")
    parser.add_argument("--schema", action="store_true", help="print the JSON Schema of graph files")
    parser.set_defaults(run=_nodes)


def _nodes(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.kinds import Kinds
    from tangentry.pipeline.terminal import kind_lines, kinds_lines

    kinds = Kinds(Path(chosen.kinds) if chosen.kinds else None)
    if chosen.schema:
        import json

        from tangentry.pipeline.schema import graph_schema

        print(json.dumps(graph_schema(kinds), indent=1))
        return 0
    print("\n".join(kind_lines(kinds.get(chosen.kind)) if chosen.kind else kinds_lines(kinds)))
    return 0


# inspect


def _inspect_words(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("files", metavar="FILE", nargs="+", help="a mesh or an image")
    parser.add_argument("--json", action="store_true", help="as JSON")
    parser.set_defaults(run=_inspect)


def _inspect(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.errors import InputError
    from tangentry.pipeline.kinds import Kinds
    from tangentry.pipeline.terminal import Progress, facts_json, facts_lines

    inspect = Kinds().get("inspect").function
    found: list[tuple[str, Any]] = []
    with Progress("files") as progress:
        for file in chosen.files:
            try:
                found.append((file, inspect(file)))
            except InputError as error:
                found.append((file, error))
            progress.one_through(len(chosen.files))
    print(facts_json(found) if chosen.json else "\n".join(facts_lines(found)))
    return 1 if any(isinstance(facts, InputError) for _, facts in found) else 0


# store


def _store_words(parser: argparse.ArgumentParser) -> None:
    commands = parser.add_subparsers(metavar="ACTION", required=True)
    for name, about, run in (
        ("size", "how much the store holds", _store_size),
        ("verify", "set aside every object whose content does not match its name", _store_verify),
        ("trim", "remove what was not used for long", _store_trim),
    ):
        action = commands.add_parser(name, help=about)
        action.add_argument("graph", metavar="GRAPH", nargs="?", help="a graph file, whose store is meant")
        action.add_argument("--store", metavar="DIR", help="the store's folder (default: .tangentry here)")
        action.set_defaults(run=run)
        if name == "trim":
            action.add_argument(
                "--keep-days", metavar="DAYS", type=_days, help="remove what was not used for so many days"
            )
            action.add_argument(
                "--max-size", metavar="SIZE", type=_size, help="remove the oldest until so much is left: 500M, 20G"
            )


def _size(text: str) -> int:
    units = {"K": 10**3, "M": 10**6, "G": 10**9, "T": 10**12}
    number, unit = (text[:-1], units[text[-1].upper()]) if text[-1:].upper() in units else (text, 1)
    try:
        return int(_positive(number) * unit)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a size; write 500M or 20G") from None


def _days(text: str) -> float:
    try:
        return _positive(text)
    except ValueError:
        raise argparse.ArgumentTypeError(f"{text!r} is not a number of days; write 30, or 0.5") from None


def _positive(text: str) -> float:
    number = float(text)
    if not 0.0 <= number < float("inf"):
        raise ValueError(text)
    return number


def _open_store(chosen: argparse.Namespace) -> Any:
    from tangentry.pipeline.errors import GraphError
    from tangentry.pipeline.seal import store_place
    from tangentry.pipeline.store import Store

    folder, url = store_place(Path(chosen.graph or "graph"), chosen.store)
    if url:
        raise GraphError(f"{url}: a store behind a URL is looked after where it lies, as a folder: --store DIR")
    if not folder.is_dir():
        raise GraphError(f"{folder}: there is no store; name a graph file or --store DIR")
    return Store(folder)


def _store_size(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.terminal import bytes_text

    sizes = _open_store(chosen).size()
    whole = (sum(count for count, _ in sizes.values()), sum(size for _, size in sizes.values()))
    for room, (count, size) in {**sizes, "in all": whole}.items():
        print(f"{room:8} {count:9,}  {bytes_text(size):>9}")
    return 0


def _store_verify(chosen: argparse.Namespace) -> int:
    bad = _open_store(chosen).verify()
    for path in bad:
        print(f"damaged, set aside: {path}")
    print(f"{len(bad)} damaged" + ("; the next build makes them again" if bad else ""))
    return 1 if bad else 0


def _store_trim(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.errors import GraphError
    from tangentry.pipeline.terminal import bytes_text

    if chosen.keep_days is None and chosen.max_size is None:
        raise GraphError("store trim: say what may go: --keep-days DAYS or --max-size SIZE")
    count, freed = _open_store(chosen).trim(chosen.keep_days, chosen.max_size)
    print(f"{count} objects removed, {bytes_text(freed)} freed")
    return 0


# start


def _start_words(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("folder", metavar="FOLDER", help="an empty or a new folder")
    parser.set_defaults(run=_start)


def _start(chosen: argparse.Namespace) -> int:
    from tangentry.pipeline.start import start

    for path in start(Path(chosen.folder)):
        print(f"written   {path}")
    print(f"now: tangentry build {Path(chosen.folder) / 'library.yaml'}")
    return 0


if __name__ == "__main__":
    sys.exit(main())
