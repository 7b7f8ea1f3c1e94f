"""The command line: parse, call, print. It holds no physics.

__init__.py     the table of commands, and how every error becomes one line
options.py      quantities and the options that commands share
scenes.py, designs.py  what was typed -> Scenes and Cameras
many.py         what was typed for a contact sheet -> its frames, drawn and told of
show.py         progress bars, tables and what is printed at the end
preview.py, compare.py, contact_sheet.py, numbers.py, exposure.py, materials.py, trace.py, live.py
                one command each
"""

import importlib
import os
import sys
from collections.abc import Sequence

import click

from pinsim import __version__
from pinsim.errors import PinsimError, nearest

# name: (module, what it does). Help needs none of the modules, so it is instant.
COMMANDS = {
    "preview": ("pinsim.cli.preview", "Draw what one camera would record of a scene."),
    "compare": ("pinsim.cli.compare", "Lay designs or holes side by side, and say which is finer."),
    "contact-sheet": ("pinsim.cli.contact_sheet", "Lay many scenes and designs out on sheets."),
    "numbers": (
        "pinsim.cli.numbers",
        "Print a camera's figures: sharpness, angles, light, best hole.",
    ),
    "exposure": ("pinsim.cli.exposure", "Tell times by light and material; print them as a card."),
    "materials": ("pinsim.cli.materials", "List films, papers and sensors, or tell all of one."),
    "live": ("pinsim.cli.live", "Change a camera in the browser and see its picture change."),
    "trace": ("pinsim.cli.trace", "Measure a drilled hole from its scan, and design with it."),
}


class _Commands(click.Group):
    """A group whose commands are imported when they are run, not when they are listed."""

    def list_commands(self, ctx: click.Context) -> list[str]:
        return list(COMMANDS)

    def get_command(self, ctx: click.Context, cmd_name: str) -> click.Command | None:
        if cmd_name not in COMMANDS:
            return None
        command = importlib.import_module(COMMANDS[cmd_name][0]).command
        if not isinstance(command, click.Command):
            raise TypeError(f"{cmd_name} is not a command")
        return command

    def format_commands(self, ctx: click.Context, formatter: click.HelpFormatter) -> None:
        with formatter.section("Commands"):
            formatter.write_dl([(name, text) for name, (_, text) in COMMANDS.items()])

    def resolve_command(
        self, ctx: click.Context, args: list[str]
    ) -> tuple[str | None, click.Command | None, list[str]]:
        if args and args[0] not in COMMANDS and not args[0].startswith("-"):
            raise click.UsageError(
                f"no command is called {args[0]!r}.{nearest(args[0], COMMANDS)} "
                f"Known: {', '.join(COMMANDS)}."
            )
        return super().resolve_command(ctx, args)


@click.group(
    cls=_Commands,
    invoke_without_command=True,
    context_settings={"help_option_names": ["-h", "--help"]},
    epilog="Lengths, angles and times take a unit: 0.30mm 4m 2in 65deg 8s. "
    "sample:NAME stands for a scene or camera that comes with pinsim. "
    "Never look at the sun through a hole or along its beam.",
)
@click.version_option(__version__, prog_name="pinsim")
@click.option("--debug", is_flag=True, help="On an error, show where in pinsim it arose.")
@click.pass_context
def _group(ctx: click.Context, debug: bool) -> None:
    """Preview, from an ordinary photo, what a camera with a bare hole will record."""
    if ctx.invoked_subcommand is None:
        click.echo(ctx.get_help())


def main(arguments: Sequence[str] | None = None) -> int:
    """Run the command line; return 0 done, 2 the user's input is wrong, 1 something failed."""
    args = list(sys.argv[1:] if arguments is None else arguments)
    # Taken out by hand, so that it may stand anywhere on the line.
    debug = "--debug" in args
    args = [one for one in args if one != "--debug"]
    # pinsim runs its own two threads; a matrix library that spins two more for each of them turns
    # a crowded machine ten times slower. Set before numpy is loaded, or it has no effect.
    os.environ.setdefault("OPENBLAS_NUM_THREADS", "1")
    try:
        result = _group.main(args, prog_name="pinsim", standalone_mode=False)
        return result if isinstance(result, int) else 0
    except click.exceptions.Exit as done:
        return done.exit_code
    except (click.ClickException, PinsimError) as error:
        if debug:
            raise
        return _complain(_text_of(error), 2)
    except (click.Abort, KeyboardInterrupt):
        return _complain("stopped; nothing was written.", 1)
    except BrokenPipeError:
        # The reader of our output went away (| head): not an error worth a word.
        os.dup2(os.open(os.devnull, os.O_WRONLY), sys.stdout.fileno())
        return 1
    except Exception as error:
        if debug:
            raise
        reason = str(error) or type(error).__name__
        return _complain(
            f"something failed that should not: {reason} (pinsim --debug shows where)", 1
        )


def _text_of(error: click.ClickException | PinsimError) -> str:
    if not isinstance(error, click.ClickException):
        return str(error)
    text = error.format_message()
    if isinstance(error, click.UsageError):
        command = error.ctx.command_path if error.ctx else "pinsim"
        text = f"{text.rstrip('.')}; see {command} --help."
    return text


def _complain(text: str, code: int) -> int:
    # ASCII, like all that is printed: a console may know no other letters.
    line = " ".join(text.split()).encode("ascii", "backslashreplace").decode()
    print(f"pinsim: {line}", file=sys.stderr)
    return code
