"""Parts that panels share: a line that tells what happened, numbers that can be copied."""

from __future__ import annotations

import functools
import html
from collections.abc import Callable, Iterable, Iterator
from contextlib import contextmanager
from typing import Any

import ipywidgets as widgets

from orbitsearch.errors import OrbitsearchError
from orbitsearch.lab.loop import on_kernel_loop

__all__ = [
    "Message",
    "answered",
    "button",
    "choice_list",
    "facts",
    "heading",
    "quiet",
    "shown_number",
]

# Colours that reach contrast 4:1 on white and on #111111, and a word that says the same.
_LOOKS = {"": ("#777777", ""), "done": ("#0d8a60", ""), "wrong": ("#c8553d", "Not done: ")}


class Message(widgets.HTML):
    """One line on what happened last; screen readers tell it when it changes."""

    def __init__(self, name: str) -> None:
        super().__init__()
        self.add_class(f"lab-message-{name}")
        self.say("")

    def say(self, text: str, look: str = "") -> None:
        """Show a text; `look` is empty, ``done`` or ``wrong``."""
        colour, before = _LOOKS[look]
        self.text = text
        self.value = (
            f'<div role="status" aria-live="polite" style="color: {colour}; line-height: 1.4; '
            f'min-height: 1.4em">{html.escape(before + text)}</div>'
        )


def answered(method: Callable[..., Any]) -> Callable[..., None]:
    """Callback of a panel on the kernel's loop: what cannot be done is told in its `message`.

    Nothing a control does may end as a traceback in the middle of a notebook, where it would stay.
    """

    @functools.wraps(method)
    def call(panel: Any, *args: Any, **kwargs: Any) -> None:
        try:
            method(panel, *args, **kwargs)
        except OrbitsearchError as problem:
            panel.message.say(str(problem), "wrong")
        except Exception as problem:
            panel.message.say(f"this is a bug: {type(problem).__name__}: {problem}", "wrong")

    return on_kernel_loop(call)


@contextmanager
def quiet(panel: Any) -> Iterator[None]:
    """What is changed inside is not listened to by a panel's `_listening` callbacks; it nests."""
    before, panel._listening = panel._listening, False
    try:
        yield
    finally:
        # Also after an exception: a panel that has stopped listening is dead.
        panel._listening = before


def button(text: str, description: str, act: Callable[[Any], Any], icon: str = "") -> Any:
    """Button that says on hover what it does."""
    one = widgets.Button(description=text, tooltip=description, icon=icon)
    one.on_click(act)
    return one


def heading(text: str) -> Any:
    """Heading of a part of a panel."""
    return widgets.HTML(f'<h4 style="margin: 0.4em 0 0.1em">{html.escape(text)}</h4>')


def choice_list(description: str, rows: int = 10, width: str = "98%") -> Any:
    """List to choose a row from, in letters of one width."""
    one = widgets.Select(options=[], rows=rows, description="", layout=widgets.Layout(width=width))
    one.tooltip = description
    one.add_class("lab-list")
    return one


STYLE = """
<style>
.lab-list select { font-family: var(--jp-code-font-family, monospace); font-size: 12px; }
.lab-facts { border-collapse: collapse; font-size: 13px; }
.lab-facts td { padding: 1px 10px 1px 0; vertical-align: top; text-align: left; border: none;
  white-space: normal; overflow-wrap: anywhere; }
.lab-facts td:first-child { color: #777777; white-space: nowrap; }
.lab-facts code { font-size: 12px; background: none; color: inherit; padding: 0; }
.lab-copy { border: 1px solid #777777; background: none; color: inherit; border-radius: 3px;
  font-size: 11px; cursor: pointer; padding: 0 5px; }
</style>
"""

_COPY = (
    "navigator.clipboard.writeText(this.dataset.text);"
    "this.textContent='copied';setTimeout(()=>this.textContent='copy',900)"
)


def facts(rows: Iterable[tuple[str, str, str]]) -> str:
    """HTML table of names, values, and what a button copies of each, if anything."""
    lines = []
    for name, value, copied in rows:
        text = html.escape(copied, quote=True)
        shown = html.escape(value if len(value) <= 260 else f"{value[:250]}... ({len(value)})")
        knob = (
            f' <button class="lab-copy" data-text="{text}" aria-label="copy {html.escape(name)}"'
            f' onclick="{_COPY}">copy</button>'
            if copied
            else ""
        )
        lines.append(f"<tr><td>{html.escape(name)}</td><td><code>{shown}</code>{knob}</td></tr>")
    return f'{STYLE}<table class="lab-facts">{"".join(lines)}</table>'


def shown_number(value: float) -> str:
    """A number for a list, rounded to six digits."""
    return f"{value:.6g}"
