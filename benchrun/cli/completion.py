"""benchrun completion: the script with which a shell completes commands and options."""

from __future__ import annotations

import click

PLACES = """\b
bash: add to ~/.bashrc  eval "$(benchrun completion bash)"
zsh:  add to ~/.zshrc   eval "$(benchrun completion zsh)"
fish: once              benchrun completion fish > ~/.config/fish/completions/benchrun.fish"""


@click.command(epilog=PLACES)
@click.argument("shell", type=click.Choice(["bash", "zsh", "fish"]))
@click.pass_context
def command(context: click.Context, shell: str) -> int:
    """Print what SHELL needs to complete commands and options."""
    from click.shell_completion import get_completion_class

    complete = get_completion_class(shell)
    assert complete is not None, f"click has no completion for {shell}"
    print(complete(context.find_root().command, {}, "benchrun", "_BENCHRUN_COMPLETE").source())
    return 0
