"""`sfcpart completion`: the script that lets a shell complete verbs, options and file names."""

from __future__ import annotations

import click

__all__ = ["command"]


@click.command("completion")
@click.argument("shell", type=click.Choice(["bash", "zsh", "fish"]))
def command(shell: str) -> None:
    """Print the script that completes sfcpart's words in SHELL.

    \b
    Examples:
      sfcpart completion bash > ~/.local/share/bash-completion/completions/sfcpart
      eval "$(sfcpart completion zsh)"
      sfcpart completion fish > ~/.config/fish/completions/sfcpart.fish
    """  # noqa: D301 - the mark is click's
    from click.shell_completion import get_completion_class

    from sfcpart.cli.verbs import PROGRAM, sfcpart

    maker = get_completion_class(shell)
    if maker is None:
        raise click.UsageError(f"no completion for {shell}")
    click.echo(maker(sfcpart, {}, PROGRAM, "_SFCPART_COMPLETE").source())
