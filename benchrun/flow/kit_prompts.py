"""What the kit's label says of its connectors, told to the operator wherever something of it is connected."""

from __future__ import annotations

from dataclasses import dataclass, replace

from benchrun.acquire.prompts import Answer, Prompt, Prompter
from benchrun.bench import Kit


@dataclass(frozen=True, slots=True)
class KitPrompter:
    """Asks as `prompter` does, and says at each connection what `label` says of the connector."""

    prompter: Prompter
    label: str

    @property
    def available(self) -> bool:
        """Whether anybody is there to answer."""
        return self.prompter.available

    def ask(self, prompt: Prompt) -> Answer:
        """Show the prompt with the label, wait for the answer."""
        if prompt.connect is not None:
            prompt = replace(prompt, cautions=(*prompt.cautions, self.label))
        return self.prompter.ask(prompt)


def with_label(prompter: Prompter, kit: Kit | None) -> Prompter:
    """Return a prompter that tells the connector of a kit; the same one where the kit says nothing of it."""
    if kit is None or kit.connector is None:
        return prompter
    torque = f", torque {kit.connector.torque}" if kit.connector.torque else ""
    return KitPrompter(prompter, f"Connector of {kit.title}: type {kit.connector.type}{torque}.")
