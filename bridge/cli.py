"""The commands: a parser, and a short function per command that walks into the rooms it needs.

Imports of the numeric rooms stay inside the functions, so that `savefit watch` and `savefit --help` stay light.
"""

from __future__ import annotations

import argparse
import sys
from collections.abc import Callable, Sequence
from pathlib import Path

from bridge import __version__, samples
from bridge.messages import FileRefused

WHILE_OPEN = ("auto", "write", "wait", "beside")
EXAMPLES = """examples:
  savefit demo --once                 fit three invented workbooks and say where to look
  savefit new quotes.xlsx --template quote
  savefit watch ~/Quotes              fit every workbook there whenever it is saved
  savefit fit quotes.xlsx             fit one workbook, once
  savefit check quotes.xlsx           say what would be done, write nothing

exit codes: 0 all models fitted, 1 something was answered with a problem, 2 a file cannot be used or wrong usage"""


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command; returns the exit code."""
    options = parser().parse_args(arguments)
    run: Callable[[argparse.Namespace], int] = options.run
    try:
        return run(options)
    except FileRefused as refusal:
        print(refusal.problem.text, file=sys.stderr)
        return 2
    except KeyboardInterrupt:
        return 130


def parser() -> argparse.ArgumentParser:
    """The whole command line."""
    top = argparse.ArgumentParser(
        prog="savefit",
        description="Regression that lives inside people's own workbooks: fill in the sheet 'fit request', save, read.",
        epilog=EXAMPLES,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    top.add_argument("--version", action="version", version=f"savefit {__version__}")
    commands = top.add_subparsers(title="commands", metavar="COMMAND", required=True)

    def command(name: str, run: Callable[[argparse.Namespace], int], text: str) -> argparse.ArgumentParser:
        made = commands.add_parser(name, help=text, description=text[0].upper() + text[1:] + ".")
        made.set_defaults(run=run)
        return made

    demo = command("demo", _demo, "copy the demo workbooks, fit them, say where to look and keep watching")
    demo.add_argument("--folder", type=Path, default=Path("savefit-demo"), help="where to (default: %(default)s)")
    demo.add_argument("--once", action="store_true", help="stop after fitting")

    watch = command("watch", _watch, "watch folders and fit every workbook that is saved there")
    watch.add_argument("folders", nargs="+", type=Path, metavar="FOLDER")
    _watch_options(watch)

    fit = command("fit", _fit, "fit what the workbooks ask for, once")
    fit.add_argument("files", nargs="+", type=Path, metavar="FILE")
    fit.add_argument("--json", action="store_true", help="print the results as JSON lines")
    fit.add_argument("--while-open", choices=WHILE_OPEN, default="auto", help="if a program has the workbook open")

    check = command("check", _check, "say what would be done and what is wrong, write nothing")
    check.add_argument("files", nargs="+", type=Path, metavar="FILE")
    check.add_argument("--json", action="store_true", help="print the plan as JSON lines")

    new = command("new", _new, "make a starter workbook from a template")
    new.add_argument("file", nargs="?", type=Path, metavar="FILE")
    new.add_argument("--template", default="blank", metavar="NAME", help="which one (default: %(default)s)")
    new.add_argument("--list", action="store_true", dest="list_them", help="list the templates")

    strip = command("strip", _strip, "take the bridge's sheets and names out again, for a clean hand-over")
    strip.add_argument("files", nargs="+", type=Path, metavar="FILE")

    keep = command("keep-running", _keep_running, "start the watcher at log-in, from now on")
    keep.add_argument("folders", nargs="*", type=Path, metavar="FOLDER")
    instead = keep.add_mutually_exclusive_group()
    instead.add_argument("--remove", action="store_true", help="no longer start it")
    instead.add_argument("--show", action="store_true", help="print what would be set up, change nothing")

    complete = command("completion", _completion, "print the completion script for a shell")
    complete.add_argument("shell", choices=("bash", "zsh", "tcsh"))
    return top


def _watch_options(command: argparse.ArgumentParser) -> None:
    command.add_argument("--polling", action="store_true", help="look at the files instead of waiting for events")
    command.add_argument(
        "--while-open",
        choices=WHILE_OPEN,
        default="auto",
        help="a workbook that a program holds open: write anyway, wait until it is closed, "
        "or put the results in a copy beside it; auto picks what is safe (default: %(default)s)",
    )
    command.add_argument(
        "--workers", type=int, default=2, metavar="N", help="how many at a time (default: %(default)s)"
    )


def _demo(options: argparse.Namespace) -> int:
    """Copy the demo workbooks (never over one that is there), fit them, say where to look, keep watching."""
    folder: Path = options.folder
    folder.mkdir(parents=True, exist_ok=True)
    files = []
    for name, content in samples.demo_files():
        files.append(folder / name)
        if not files[-1].exists():
            files[-1].write_bytes(content)
    code = _fit_all(files, as_json=False, while_open="auto")
    print(f"\nThree workbooks with invented data stand fitted in {folder.resolve()}.")
    print("Open one in your spreadsheet program and start at its sheet 'fit results'; 'fit request' is what was asked,")
    print("'fit estimates' takes new cases. Colleagues need nothing installed to read, check and use them.")
    if options.once:
        return code
    print("\nWatching the folder: change a request or a data cell, save, and look again. Ctrl+C stops.")
    from bridge.watch import WatchOptions, watch

    return watch([folder], WatchOptions())


def _watch(options: argparse.Namespace) -> int:
    from bridge.watch import WatchOptions, watch

    missing = [folder for folder in options.folders if not folder.is_dir()]
    for folder in missing:
        print(f"{folder}: there is no such folder. Check the spelling, or make it first.", file=sys.stderr)
    if missing:
        return 2
    wanted = WatchOptions(polling=options.polling, while_open=options.while_open, workers=options.workers)
    return watch(options.folders, wanted)


def _fit(options: argparse.Namespace) -> int:
    return _fit_all(options.files, options.json, options.while_open)


def _fit_all(files: Sequence[Path], as_json: bool, while_open: str) -> int:
    from bridge import job, reporting

    worst = 0
    for file in reporting.progress(files):
        report = job.fit_workbook(file, while_open=while_open, always_fit=as_json)
        print(reporting.json_line(report) if as_json else reporting.text(report), flush=True)
        worst = max(worst, report.exit_code)
    return worst


def _check(options: argparse.Namespace) -> int:
    from bridge import job, reporting

    worst = 0
    for file in reporting.progress(options.files):
        report = job.fit_workbook(file, write=False, always_fit=True)
        print(reporting.json_line(report) if options.json else reporting.plan(report), flush=True)
        worst = max(worst, report.exit_code)
    return worst


def _new(options: argparse.Namespace) -> int:
    if options.list_them:
        width = max(len(name) for name in samples.template_names())
        for name in samples.template_names():
            print(f"{name:<{width}}  {samples.template_line(name)}")
        return 0
    if options.file is None:
        print("Say which file to make: savefit new FILE (savefit new --list shows the templates).", file=sys.stderr)
        return 2
    if options.template not in samples.template_names():
        print(
            f"There is no template '{options.template}'. There are: {', '.join(samples.template_names())}.",
            file=sys.stderr,
        )
        return 2
    file: Path = options.file if options.file.suffix else options.file.with_suffix(".xlsx")
    if file.exists():
        print(f"{file} exists already; it was left as it is. Give another name.", file=sys.stderr)
        return 2
    file.write_bytes(samples.template(options.template))
    print(f"{file} is ready. Fill in the data and the sheet 'fit request', save, then: savefit fit {file}")
    return 0


def _strip(options: argparse.Namespace) -> int:
    from bridge import job

    worst = 0
    for file in options.files:
        try:
            changed = job.strip_workbook(file)
        except FileRefused as refusal:
            print(f"{file}: {refusal.problem.text}", file=sys.stderr)
            worst = 2
        else:
            print(f"{file}: {'our sheets and names are out' if changed else 'there was nothing of ours in it'}")
    return worst


def _keep_running(options: argparse.Namespace) -> int:
    from bridge.watch import login

    if not options.folders and not options.remove:
        print("Say which folders to watch: savefit keep-running FOLDER…", file=sys.stderr)
        return 2
    missing = [folder for folder in options.folders if not folder.is_dir()]
    if missing:
        print(f"{missing[0]}: there is no such folder.", file=sys.stderr)
        return 2
    start = login.for_this_system([folder.resolve() for folder in options.folders])
    if options.show:
        print(f"This would be put in {start.path}:", file=sys.stderr)
        print(start.text, end="")
        return 0
    return login.remove(start) if options.remove else login.install(start)


def _completion(options: argparse.Namespace) -> int:
    import shtab

    print(shtab.complete(parser(), options.shell))
    return 0


if __name__ == "__main__":
    sys.exit(main())
