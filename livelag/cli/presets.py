"""`livelag presets`: what can be loaded."""

from __future__ import annotations

import argparse

from livelag.cli.common import add_command, console, new_table, show_json


def add_to(commands: argparse._SubParsersAction[argparse.ArgumentParser]) -> None:
    """Add the command."""
    parser = add_command(
        commands, "presets", "list the stages and phrases that ship with livelag", "livelag presets"
    )
    parser.set_defaults(run=run)


def run(args: argparse.Namespace) -> None:
    """List presets and phrases."""
    from livelag.circuit.presets import load_stage, preset_names
    from livelag.notes.phrases import PHRASES

    stages = {name: load_stage(name) for name in preset_names()}
    if args.json:
        show_json(
            {
                "presets": [
                    {"name": n, "title": s.title, "about": s.about, "ranges": list(s.range_names)}
                    for n, s in stages.items()
                ],
                "phrases": [
                    {"name": p.name, "about": p.about, "seconds": p.duration_s}
                    for p in PHRASES.values()
                ],
            }
        )
        return
    table = new_table("preset", "ranges", "what it is")
    for name, stage in stages.items():
        table.add_row(name, ", ".join(stage.range_names), f"{stage.title}. {stage.about}")
    phrases = new_table("phrase", "seconds", "what it is", right=("seconds",))
    for phrase in PHRASES.values():
        phrases.add_row(phrase.name, f"{phrase.duration_s:.1f}", phrase.about)
    out = console()
    out.print(table)
    out.print(phrases)
    out.print("Any TOML file of the same form can be named by its path in place of a preset.")
