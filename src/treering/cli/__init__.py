"""The commands of treering: thin functions that call the packages below and print.

Data goes to stdout, remarks to stderr; exit status 0 done, 1 refused or fell short with the reason,
2 wrong use. Heavy packages load only inside the command that needs them.
"""

from __future__ import annotations

import difflib
import os
import sys
import warnings
from collections.abc import Sequence

from cyclopts import App, CycloptsError, Group, UnknownCommandError

from treering import __version__
from treering.cli.output import EXIT_DONE, EXIT_REFUSED, EXIT_WRONG_USE, remark
from treering.errors import TreeringError

app = App(
    name="treering",
    version=__version__,
    help="The weekly update of a living systematic review. A report informs a panel; it is no treatment "
    "recommendation.",
    help_format="plaintext",
    version_flags=["--version"],
)

GROUPS = {
    "A review": {
        "demo": "running:demo",
        "start": "running:start",
        "template": "running:template",
        "check": "running:check",
        "update": "running:update",
        "schedule": "running:schedule",
    },
    "Its past": {
        "history": "looking:history",
        "compare": "looking:compare",
        "audit": "looking:audit",
        "replay": "looking:replay",
        "notices": "looking:notices",
        "store": "keeping:store",
    },
    "Calculators": {
        "pool": "calculating:pool",
        "boundaries": "calculating:boundaries",
        "simulate": "simulating:simulate",
    },
}

HELP = {
    "demo": "Play the invented review through seven weekly updates.",
    "start": "Make a new review folder with a commented config.",
    "template": "Write a blank extraction form for one trial.",
    "check": "Read config and intake and say what an update would do; writes nothing.",
    "update": "Run one weekly update.",
    "schedule": "Run the update every week until stopped.",
    "history": "List the versions, or the entries of a trial, person or outcome.",
    "compare": "Say what differs between two versions.",
    "audit": "Check the evidence store and the released pages.",
    "replay": "Compute a version again and compare it byte by byte.",
    "notices": "List who was told what, and what is not delivered yet.",
    "store": "Copy, export, import or prove the evidence store.",
    "pool": "Pool a table of trials outside any review.",
    "boundaries": "Boundaries, spending and required information for figures typed in.",
    "simulate": "Simulate this review's own monitoring plan: how often it errs.",
}


def _register() -> None:
    for rank, (title, commands) in enumerate(GROUPS.items(), start=1):
        group = Group(title, sort_key=rank)
        for place_in_group, (name, place) in enumerate(commands.items()):
            app.command(
                f"treering.cli.{place}", name=name, help=HELP[name], group=group, sort_key=place_in_group
            )


_register()


def main(arguments: Sequence[str] | None = None) -> None:
    """Run one command and exit with its status.

    Parameters
    ----------
    arguments : sequence of str, optional
        The command line; the process's own when left out.
    """
    if arguments is None and not sys.warnoptions:
        # Warnings of libraries speak to programmers; python -W, or the tests, still show them.
        warnings.simplefilter("ignore")
    try:
        status = _run(list(sys.argv[1:] if arguments is None else arguments))
        sys.stdout.flush()
    except BrokenPipeError:
        # The reader of a pipe, `head` for example, has gone: nothing is left to tell, also not at exit.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        status = EXIT_REFUSED
    sys.exit(status)


def _run(tokens: list[str]) -> int:
    """Run one command and return its exit status; faults that people can mend become one remark."""
    try:
        status = app(tokens, exit_on_error=False, print_error=False, result_action="return_value")
    except UnknownCommandError:
        remark(_unknown(tokens))
        return EXIT_WRONG_USE
    except CycloptsError as error:
        command = f" {tokens[0]}" if tokens and tokens[0] in HELP else ""
        remark(f"{error} See `treering{command} --help`.")
        return EXIT_WRONG_USE
    except TreeringError as error:
        remark(str(error))
        return EXIT_REFUSED
    except BrokenPipeError:
        raise
    except OSError as error:
        remark(f"{error.filename or 'the system'}: {error.strerror or error}.")
        return EXIT_REFUSED
    except KeyboardInterrupt:
        remark("Stopped. What was committed stays; run the command again to go on.")
        return EXIT_REFUSED
    return status if isinstance(status, int) else EXIT_DONE


def _unknown(tokens: Sequence[str]) -> str:
    word = next((token for token in tokens if not token.startswith("-") and token not in HELP), "")
    near = difflib.get_close_matches(word, HELP, n=1)
    hint = f" Did you mean `treering {near[0]}`?" if near else ""
    return f"There is no command {word!r}.{hint} See `treering --help`."
