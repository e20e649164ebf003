"""Which commands and options there are, and what is said when one is mistyped."""

from __future__ import annotations

import argparse
import sys
from typing import Any, NoReturn

from discrim.errors import nearest

COMMANDS = ("derive", "check", "weigh", "report")

_HEAD = "Decide between competing reaction mechanisms from laboratory rate data."
_FOOT = """\
exit codes: 0 it ran, whatever the verdicts; 1 it ran, but something asked for could not be
computed; 2 the input is wrong; 130 interrupted"""


class Parser(argparse.ArgumentParser):
    """An argument parser that answers a mistyped word with the nearest known one."""

    def __init__(self, **options: Any) -> None:
        super().__init__(
            allow_abbrev=False,
            formatter_class=argparse.RawDescriptionHelpFormatter,
            **options,
        )

    def error(self, message: str) -> NoReturn:
        shown = "".join(ch if ch.isprintable() else " " for ch in message)
        self.exit(2, f"{self.prog}: {shown}\nSee `{self.prog} --help`.\n")

    def parse_args(self, args: Any = None, namespace: Any = None) -> Any:
        options, unknown = self.parse_known_args(args, namespace)
        if unknown:
            word = unknown[0].partition("=")[0]
            known = [flag for action in _all_actions(self) for flag in action.option_strings]
            if word.startswith("-"):
                self.error(f"there is no option {word}. {nearest(word, known)}".rstrip())
            self.error(f"one study at a time; {word} is one too many")
        return options


class _Version(argparse.Action):
    """Prints the version; read only when asked for."""

    def __init__(self, option_strings: list[str], dest: str, **_: Any) -> None:
        super().__init__(option_strings, argparse.SUPPRESS, nargs=0, help="print the version")

    def __call__(self, parser: argparse.ArgumentParser, *_: Any) -> None:
        import discrim

        print(f"discrim {discrim.__version__}")
        parser.exit()


class _Command(argparse.Action):
    """Hands the rest of the line to the parser of one command."""

    def __init__(self, option_strings: list[str], dest: str, **options: Any) -> None:
        super().__init__(option_strings, dest, **options)
        self.parsers: dict[str, Parser] = {}

    def __call__(
        self, parser: argparse.ArgumentParser, namespace: Any, values: Any, *_: Any
    ) -> None:
        if not values:
            parser.print_help(sys.stderr)
            parser.exit(2)
        word, *rest = values
        if word not in self.parsers:
            hint = nearest(word, self.parsers) or f"Commands: {', '.join(self.parsers)}."
            parser.error(f'there is no command "{word[:60]}". {hint}')
        self.parsers[word].parse_args(rest, namespace)


def build() -> Parser:
    """The parser of ``discrim``; each command sets ``run`` to the function that runs it."""
    from discrim.cli import check, derive, report, weigh

    modules = {"derive": derive, "check": check, "weigh": weigh, "report": report}
    width = max(map(len, modules))
    words = "\n".join(f"  {name:<{width}}  {m.HELP}" for name, m in modules.items())
    parser = Parser(
        prog="discrim",
        usage="discrim COMMAND STUDY [options]",
        description=_HEAD,
        epilog=f"commands:\n{words}\n\n{_FOOT}",
        add_help=True,
    )
    parser.add_argument("--version", action=_Version)
    command = parser.add_argument(
        "command", action=_Command, nargs=argparse.REMAINDER, help=argparse.SUPPRESS
    )
    assert isinstance(command, _Command)
    for name, module in modules.items():
        one = Parser(prog=f"discrim {name}", description=module.__doc__)
        module.add_arguments(one)
        one.set_defaults(run=module.run)
        command.parsers[name] = one
    return parser


def common(
    parser: argparse.ArgumentParser,
    *,
    study: str = "the study file (TOML)",
    needed: bool = True,
) -> None:
    """The options that every command has; a command can do without a study if not ``needed``."""
    parser.add_argument("study", metavar="STUDY", help=study, nargs=None if needed else "?")
    parser.add_argument("--json", action="store_true", help="print the records as JSON")
    parser.add_argument("--quiet", action="store_true", help="print the least, and no progress")


def results(parser: argparse.ArgumentParser) -> None:
    """The option that says where the results folder is."""
    parser.add_argument(
        "--out", metavar="DIR", help="results folder (default: results/<study name> beside it)"
    )


def whole(at_least: int) -> Any:
    """A type for options: a whole number, not under ``at_least``."""

    def read(text: str) -> int:
        try:
            found = int(text)
        except ValueError:
            found = at_least - 1
        if found < at_least or found > 2**31:
            raise argparse.ArgumentTypeError(
                f"{text[:40]!r} is not a whole number from {at_least} up"
            )
        return found

    return read


def _all_actions(parser: argparse.ArgumentParser) -> list[argparse.Action]:
    return list(parser._actions)
