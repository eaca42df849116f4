"""The command line: watch, sweep, vet, explain, demo."""

from __future__ import annotations

import argparse
import os
import sys
from collections.abc import Sequence
from importlib.metadata import version
from io import TextIOWrapper

from spikeward.daemon.names import shown
from spikeward.daemon.trouble import Trouble

_EPILOG = """examples:
  spikeward vet rules.yaml                      is the rule file right, and how are real names read?
  spikeward sweep rules.yaml                    take in all that is there, publish, and exit
  spikeward watch rules.yaml                    go on until stopped
  spikeward explain rules.yaml N1_07            what was read of a series, and why it is what it is
  spikeward demo night                          play an invented night into the folder 'night'

exit codes: 0 all is well; 1 something needs a person or still waits; 2 it could not run.
"""


def build_parser() -> argparse.ArgumentParser:
    """The parser of the command line, one sub-command each."""
    parser = argparse.ArgumentParser(
        prog="spikeward",
        description="Watches folders of instrument exports and solves and checks standard-addition series.",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )
    parser.add_argument("--version", action="version", version=f"spikeward {version('spikeward')}")
    commands = parser.add_subparsers(dest="command", required=True, metavar="COMMAND")
    _watch(commands)
    _sweep(commands)
    _vet(commands)
    _explain(commands)
    _demo(commands)
    return parser


_Commands = "argparse._SubParsersAction[argparse.ArgumentParser]"


def _command(commands: _Commands, name: str, words: str, example: str) -> argparse.ArgumentParser:  # type: ignore[valid-type]
    return commands.add_parser(  # type: ignore[attr-defined,no-any-return]
        name,
        help=words,
        description=words[0].upper() + words[1:] + ".",
        epilog=f"example:\n  {example}",
        formatter_class=argparse.RawDescriptionHelpFormatter,
        allow_abbrev=False,
    )


def _logging(parser: argparse.ArgumentParser) -> None:
    parser.add_argument("--json-log", action="store_true", help="write the log as one JSON object a line")


def _workers(parser: argparse.ArgumentParser) -> None:
    parser.add_argument(
        "--workers", type=_count, default=1, metavar="N", help="reader processes, 1 or 2 are enough (default: 1)"
    )


def _count(text: str) -> int:
    if not text.isascii() or not text.isdigit() or not 1 <= int(text) <= 64:
        raise argparse.ArgumentTypeError(f"'{text}' is not a whole number from 1 to 64")
    return int(text)


def _pace(text: str) -> float:
    try:
        pace = float(text)
    except ValueError:
        pace = -1.0
    if not 0 <= pace < 1e6:
        raise argparse.ArgumentTypeError(f"'{text}' is not a number of minutes a second; 0 plays all at once")
    return pace


def _watch(commands: _Commands) -> None:  # type: ignore[valid-type]
    parser = _command(commands, "watch", "watch the folders until stopped", "spikeward watch rules.yaml")
    parser.add_argument("config", help="the rule file")
    _workers(parser)
    _logging(parser)


def _sweep(commands: _Commands) -> None:  # type: ignore[valid-type]
    parser = _command(
        commands, "sweep", "take in all that is there, publish, and exit", "spikeward sweep rules.yaml --close"
    )
    parser.add_argument("config", help="the rule file")
    parser.add_argument("--close", action="store_true", help="close every batch: nothing more is expected")
    parser.add_argument(
        "--again",
        nargs="?",
        const="",
        metavar="BATCH",
        help="solve closed batches (all, or one) again under the present rules; recorded in the ledger",
    )
    _workers(parser)
    _logging(parser)


def _vet(commands: _Commands) -> None:  # type: ignore[valid-type]
    parser = _command(
        commands,
        "vet",
        "say what is wrong in a rule file, and show how real names are read",
        "spikeward vet rules.yaml",
    )
    parser.add_argument("config", help="the rule file")
    parser.add_argument("--short", action="store_true", help="one line a problem, for tools")


def _explain(commands: _Commands) -> None:  # type: ignore[valid-type]
    parser = _command(
        commands,
        "explain",
        "say what was read from a file or for a series, what it became, and why",
        "spikeward explain rules.yaml inbox/run3.csv",
    )
    parser.add_argument("config", help="the rule file")
    parser.add_argument("subject", help="a file below a watched folder, or a series by the name of its flag")


def _demo(commands: _Commands) -> None:  # type: ignore[valid-type]
    parser = _command(
        commands, "demo", "play an invented night into a folder and run the daemon on it", "spikeward demo night"
    )
    parser.add_argument("folder", help="a folder that does not exist yet, or is empty")
    parser.add_argument(
        "--pace", type=_pace, default=60.0, metavar="MINUTES",
        help="minutes of the night in a second; 0 plays all at once (default: 60)",
    )  # fmt: skip
    parser.add_argument("--seed", type=int, default=7, help="another night (default: 7)")


def _begin_again_in_utf8() -> None:
    """Names of files are bytes; which letters they are, and so what is published, must not depend on the locale."""
    os.environ["PYTHONUTF8"] = "1"  # for the readers' processes, too
    os.execv(sys.executable, [sys.executable, "-X", "utf8", *sys.orig_argv[1:]])


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one command.

    Returns
    -------
    the exit code: 0 all is well, 1 something needs a person or still waits, 2 it could not run
    """
    if arguments is None and sys.getfilesystemencoding() != "utf-8":
        _begin_again_in_utf8()
    for stream in (sys.stdout, sys.stderr):
        if isinstance(stream, TextIOWrapper):
            stream.reconfigure(errors="backslashreplace")  # a terminal that lacks a sign still gets the sentence
    options = build_parser().parse_args(arguments)
    try:
        code = _run(options)
        sys.stdout.flush()
    except Trouble as trouble:
        return _give_up(str(trouble))
    except KeyboardInterrupt:
        return 2
    except BrokenPipeError:
        return _nobody_listens()
    except OSError as error:
        where = f"{shown(str(error.filename))}: " if error.filename is not None else ""
        return _give_up(f"{where}{error.strerror or error}; what was published stands, run it again once mended")
    return code


def _give_up(sentence: str) -> int:
    try:
        print(f"spikeward: {sentence}", file=sys.stderr)
        sys.stdout.flush()
    except OSError:
        return _nobody_listens()
    return 2


def _nobody_listens() -> int:
    """Output cannot be written (a closed pipe, a full disk): nothing more is said, not even at the end."""
    os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
    return 2


def _run(options: argparse.Namespace) -> int:
    # Each command imports what it needs, so that --help and vet answer at once.
    if options.command == "vet":
        from spikeward.daemon.vet import vet

        return vet(options.config, short=options.short)
    if options.command == "explain":
        from spikeward.daemon.explain import explain

        return explain(options.config, options.subject)
    if options.command == "sweep":
        from spikeward.daemon.sweep import sweep_command

        return sweep_command(
            options.config, close=options.close, again=options.again, workers=options.workers, json_log=options.json_log
        )
    if options.command == "watch":
        from spikeward.daemon.watch import watch_command

        return watch_command(options.config, workers=options.workers, json_log=options.json_log)
    from spikeward.daemon.demo.run import demo

    return demo(options.folder, pace=options.pace, seed=options.seed)


if __name__ == "__main__":
    sys.exit(main())
