"""Entry point: one verb, its arguments, an exit status that scripts can trust.

0 done, 1 failed, 2 bad input or usage, 3 done but some shot is rejected.
"""

from __future__ import annotations

import argparse
import contextlib
import importlib
import os
import sys
from collections.abc import Sequence

from shpb.cli.status import BAD_INPUT, FAILED
from shpb.errors import InputError, ShpbError
from shpb.version import VERSION

# By their names on the command line, in the order of --help. Only the module that is needed is imported: all of them
# together cost as much as numpy.
_MODULES = {
    "reduce": "reduce",
    "adjust": "adjust",
    "watch": "watch",
    "show": "show",
    "merge": "merge",
    "report": "report",
    "export": "export",
    "calibrate": "calibrate",
    "recalibrate": "recalibrate",
    "record": "record",
    "forms": "forms",
    "demo": "demo",
    "help": "help_topics",
    "completion": "completion",
}

_EPILOG = """\
A verdict speaks about data, never about safety: do not go near the rig because
this program has finished. Local rules and licensed practice come first.

exit status: 0 done, 1 failed, 2 bad input or usage, 3 done, a shot is rejected
"""


def parser(verb: str = "") -> argparse.ArgumentParser:
    """Return the parser of the whole command line, or with one verb alone where ``verb`` names one."""
    top = argparse.ArgumentParser(
        prog="shpb",
        description="Reduce split Hopkinson pressure bar shots: from voltage records to stress,\n"
        "strain, strain rate, a force-equilibrium check and a verdict.",
        epilog=_EPILOG,
        formatter_class=argparse.RawDescriptionHelpFormatter,
    )
    top.add_argument("--version", action="version", version=f"shpb {VERSION}")
    verbs = top.add_subparsers(title="verbs", metavar="VERB", required=True)
    for name in [verb] if verb in _MODULES else _MODULES:
        module = importlib.import_module(f"shpb.cli.{_MODULES[name]}")
        added = verbs.add_parser(
            name,
            help=module.HELP,
            description=module.DESCRIPTION,
            epilog=module.EXAMPLE,
            formatter_class=argparse.RawDescriptionHelpFormatter,
        )
        module.add_arguments(added)
        added.set_defaults(run=module.run, json=False)
    return top


def verb_parsers() -> dict[str, tuple[str, argparse.ArgumentParser]]:
    """What each verb does in a line, and its parser, by its name."""
    top = parser()
    held = next(one for one in top._actions if isinstance(one, argparse._SubParsersAction))
    return {one.dest: (one.help or "", held.choices[one.dest]) for one in held._choices_actions}


def main(arguments: Sequence[str] | None = None) -> int:
    """Run one verb and return the exit status."""
    for stream in (sys.stdout, sys.stderr):
        # A console of few characters must not stop the program over a name it cannot show.
        if hasattr(stream, "reconfigure"):
            stream.reconfigure(errors="replace")
    arguments = sys.argv[1:] if arguments is None else arguments
    options = parser(arguments[0] if arguments else "").parse_args(arguments)
    try:
        return int(options.run(options))
    except ShpbError as error:
        _say(error, as_json=getattr(options, "json", False))
        return BAD_INPUT if isinstance(error, InputError) else FAILED
    except BrokenPipeError:
        # The reader of the pipe has left (head, less): nothing is wrong, and nothing more to say.
        with contextlib.suppress(OSError):
            os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 0
    except OSError as error:
        where = str(error.filename) if error.filename is not None else ""
        said = ShpbError(f"the system refused: {error.strerror or error}", where=where)
        _say(said, as_json=getattr(options, "json", False))
        return FAILED
    except KeyboardInterrupt:
        print("shpb: stopped; what was finished is stored whole", file=sys.stderr)
        return FAILED


def _say(error: ShpbError, *, as_json: bool) -> None:
    from shpb.cli.say import say

    if as_json:
        from shpb.view.summary import error_json, json_text

        print(json_text(error_json(error)))
    say(str(error))
