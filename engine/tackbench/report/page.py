"""The shootout's page: plain HTML made from ``shootout.json`` alone, which plays the files that lie beside it."""

from __future__ import annotations

import base64
import hashlib
from collections.abc import Iterable, Mapping
from html import escape
from typing import Any
from urllib.parse import quote

from tackbench.report.figures import FIGURES, Figure

STYLE = """
:root { color-scheme: light dark; --ink: #1d2326; --soft: #56626a; --ground: #fbfaf7; --card: #ffffff;
  --line: #d5d3cb; --mark: #8a4b12; }
@media (prefers-color-scheme: dark) { :root { --ink: #e7e5df; --soft: #a3adb3; --ground: #17191b;
  --card: #1f2326; --line: #3a4045; --mark: #e5a566; } }
* { box-sizing: border-box; }
body { margin: 0 auto; padding: 1.2rem 1rem 3rem; max-width: 62rem; background: var(--ground); color: var(--ink);
  font: 1rem/1.5 system-ui, sans-serif; }
h1 { font-size: 1.5rem; line-height: 1.25; margin: .2rem 0 .4rem; }
h2 { font-size: 1.1rem; margin: 2.2rem 0 .6rem; }
p { margin: .4rem 0; max-width: 46rem; }
.soft { color: var(--soft); }
.files { list-style: none; margin: 1rem 0; padding: 0; display: grid; gap: .7rem; }
.files li { background: var(--card); border: 1px solid var(--line); border-radius: .4rem; padding: .7rem .9rem; }
.files h3 { font-size: 1rem; margin: 0 0 .35rem; overflow-wrap: anywhere; }
.tag { color: var(--mark); font-weight: normal; }
audio { width: 100%; display: block; }
.files .soft { font-size: .9rem; }
.wide { overflow-x: auto; border: 1px solid var(--line); border-radius: .4rem; background: var(--card); }
table { border-collapse: collapse; width: 100%; font-variant-numeric: tabular-nums; }
th, td { padding: .35rem .6rem; text-align: right; white-space: nowrap; border-bottom: 1px solid var(--line); }
tr:last-child > * { border-bottom: 0; }
th:first-child { text-align: left; white-space: normal; min-width: 10rem; font-weight: 600; }
td.told { text-align: left; white-space: normal; }
thead th { color: var(--soft); font-weight: normal; vertical-align: bottom; }
dl { display: grid; grid-template-columns: max-content 1fr; gap: .15rem .9rem; font-size: .9rem; }
dd { margin: 0; color: var(--soft); }
@media (max-width: 30rem) { dl { grid-template-columns: 1fr; } dd { margin-bottom: .3rem; } }
li + li { margin-top: .25rem; }
.files li + li { margin-top: 0; }
"""

SCRIPT = """
const players = [...document.querySelectorAll("audio")];
for (const player of players) {
  player.volume = 0.5;
  player.addEventListener("play", () => {
    for (const other of players) if (other !== player) other.pause();
  });
}
"""


def page(data: Mapping[str, Any]) -> str:
    """The page as text, from the data of ``shootout.json`` (schema "tackbench.shootout", version 1).

    Every name is escaped as text, and the content security policy lets nothing run or load but the page's own
    style, its own few lines of script and the files beside it.
    """
    title = f"{data['stage']['title']}: {data['take']['name']}"
    entries = [data["bypass"], *data["variants"]]
    return "\n".join(
        [
            "<!DOCTYPE html>",
            '<html lang="en">',
            _head(title),
            "<body>",
            *_opening(title, data),
            *_players(entries, data["matching"]),
            *_figures(entries),
            *_list("What to know", data["notes"]),
            *_list("Left out", data["left_out"]),
            *_take(data),
            f"<script>{SCRIPT}</script>",
            "</body>",
            "</html>",
            "",
        ]
    )


def _head(title: str) -> str:
    policy = (
        f"default-src 'none'; style-src '{_hash(STYLE)}'; script-src '{_hash(SCRIPT)}'; "
        "media-src 'self' file:; base-uri 'none'; form-action 'none'"
    )
    return (
        '<head>\n<meta charset="utf-8">\n'
        f'<meta http-equiv="Content-Security-Policy" content="{policy}">\n'
        '<meta name="viewport" content="width=device-width, initial-scale=1">\n'
        f"<title>{escape(title)}</title>\n<style>{STYLE}</style>\n</head>"
    )


def _hash(text: str) -> str:
    """The source expression that allows exactly this inline text (Content Security Policy Level 3, W3C)."""
    return "sha256-" + base64.b64encode(hashlib.sha256(text.encode()).digest()).decode()


def _opening(title: str, data: Mapping[str, Any]) -> Iterable[str]:
    yield f"<h1>{escape(title)}</h1>"
    if data["question"]:
        yield f"<p>{escape(_capital(data['question']))}.</p>"
    yield (
        '<p class="soft">All files have the same loudness, so that you compare tone and not level; the column '
        "<em>level</em> says what that hides. Start with the volume low: a driven stage has far more treble than a "
        "speaker lets through, and these files have been through no speaker.</p>"
    )


def _capital(text: str) -> str:
    return text[:1].upper() + text[1:]


def _players(entries: Iterable[Mapping[str, Any]], matching: Mapping[str, Any]) -> Iterable[str]:
    yield "<h2>Listen</h2>"
    if matching["words"]:
        yield f'<p class="soft">{escape(_capital(matching["words"]))}.</p>'
    yield '<ul class="files">'
    for entry in entries:
        yield f"<li><h3>{_name(entry)}</h3>{_player(entry)}</li>"
    yield "</ul>"


def _name(entry: Mapping[str, Any]) -> str:
    tag = ' <span class="tag">reference</span>' if entry.get("reference") else ""
    return escape(entry["words"]) + tag


def _player(entry: Mapping[str, Any]) -> str:
    if entry["file"] is None:
        return f"<p>Not rendered: {escape(' '.join(entry['over_limits']))}</p>"
    address = escape(quote(entry["file"]))
    label = escape(f"Play {entry['words']}")
    return f'<audio controls preload="metadata" src="{address}" aria-label="{label}"></audio>'


def _figures(entries: Iterable[Mapping[str, Any]]) -> Iterable[str]:
    yield '<h2>Figures</h2>\n<div class="wide" tabindex="0" role="region" aria-label="Figures">\n<table>'
    heads = "".join(f'<th scope="col">{_heading(figure)}</th>' for figure in FIGURES)
    yield f'<thead><tr><th scope="col">variant</th>{heads}</tr></thead>\n<tbody>'
    for entry in entries:
        yield f'<tr><th scope="row">{_name(entry)}</th>{_cells(entry)}</tr>'
    yield "</tbody>\n</table>\n</div>\n<dl>"
    for figure in FIGURES:
        yield f"<dt>{escape(figure.name)}</dt><dd>{escape(figure.about)}</dd>"
    yield "</dl>"


def _heading(figure: Figure) -> str:
    return escape(figure.name) + (f"<br>{escape(figure.unit)}" if figure.unit else "")


def _cells(entry: Mapping[str, Any]) -> str:
    if entry["file"] is None:
        return f'<td class="told" colspan="{len(FIGURES)}">left out: {escape(" ".join(entry["over_limits"]))}</td>'
    return "".join(f"<td>{escape(figure.text(entry).replace('-', '−'))}</td>" for figure in FIGURES)


def _list(heading: str, sentences: Iterable[str]) -> Iterable[str]:
    told = list(sentences)
    if told:
        yield f"<h2>{escape(heading)}</h2>\n<ul>"
        yield from (f"<li>{escape(_capital(sentence))}</li>" for sentence in told)
        yield "</ul>"


def _take(data: Mapping[str, Any]) -> Iterable[str]:
    take = data["take"]
    yield f"<h2>The take</h2>\n<p>{escape(take['name'])}: {take['seconds']:.1f} s, {take['rate']} Hz, "
    yield f"{_channels(take['channels'])}. {escape(_capital(take['calibration']))}.</p>"
    yield (
        f'<p class="soft">Quality {escape(data["quality"])}; made by {escape(data["made_by"])}. Everything on this '
        "page, and every part value behind it, is in shootout.json beside it.</p>"
    )


def _channels(count: int) -> str:
    return {1: "mono", 2: "stereo"}.get(count, f"{count} channels")
