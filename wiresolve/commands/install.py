"""Commands about the installation: `doctor` and `completion`."""

from __future__ import annotations

import json

import click

import wiresolve.commands.options as options
from wiresolve.commands.terminal import say, say_json

VARIABLE = "_WIRESOLVE_COMPLETE"
"""What the shell's script sets to ask for completions."""


@click.command(cls=options.Command, example="wiresolve doctor")
@options.as_json("Print the findings as JSON.")
@options.quiet
def doctor(as_json: bool, quiet: bool) -> int:
    """Prove the installation.

    Checks packages and system libraries, and solves eight wires whose energies are known in closed form.
    """
    from wiresolve.commands.doctor import examine

    found = []
    for line in examine():
        found.append({"ok": line.ok, "text": line.text})
        if not (as_json or quiet):
            say(line.text)
    sound = all(line["ok"] for line in found)
    if as_json:
        say_json(json.dumps({"sound": sound, "findings": found}, indent=2, ensure_ascii=False))
    elif not quiet:
        say("all is well" if sound else "something is amiss, see above")
    return 0 if sound else 1


@click.command(cls=options.Command, example="wiresolve completion bash > ~/.wiresolve-complete.bash")
@click.argument("shell", metavar="SHELL", type=options.Words(("bash", "zsh", "fish")))
@click.pass_context
def completion(context: click.Context, shell: str) -> None:
    """Print a script for completion in a shell.

    It completes commands, options, shapes and materials. SHELL is bash, zsh or fish. For bash, add "source
    ~/.wiresolve-complete.bash" to ~/.bashrc; for zsh, likewise to ~/.zshrc, after compinit; for fish, write it to
    ~/.config/fish/completions/wiresolve.fish.
    """
    from click.shell_completion import get_completion_class

    made = get_completion_class(shell)
    assert made is not None
    say(made(context.find_root().command, {}, "wiresolve", VARIABLE).source().strip("\n"))
