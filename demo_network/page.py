"""The page that the demo leaves: what was done, what was hidden and found, and which digests to read."""

from collections.abc import Iterable, Mapping, Sequence
from html import escape
from pathlib import Path
from string import Template
from typing import Any

from demo_network.event import Event
from demo_network.keepsakes import Kept
from demo_network.planted import EVENTS

STYLE = """
:root { --paper: #FBF8F1; --tint: #EFE8D8; --ink: #22261F; --loam: #565042; --line: #8A8270; --field: #23564A }
@media (prefers-color-scheme: dark) {
  :root { --paper: #171A16; --tint: #2A2E26; --ink: #F1EDE2; --loam: #BEB7A4; --line: #7C7A6C; --field: #93CCBA }
}
body { background: var(--paper); color: var(--ink); font: 17px/1.45 system-ui, sans-serif; margin: 0 auto;
  max-width: 56rem; padding: 24px 16px 64px }
h1 { font-size: 28px; line-height: 1.2 } h2 { font-size: 21px; margin-top: 40px }
p, li { max-width: 34rem } a { color: var(--field) } .quiet { color: var(--loam) }
.wide { overflow-x: auto } table { border-collapse: collapse; width: 100% }
th, td { border-bottom: 1px solid var(--line); padding: 8px 12px 8px 0; text-align: left; vertical-align: top }
td:first-child { white-space: nowrap }
td.n { text-align: right; font-variant-numeric: tabular-nums } th { color: var(--loam); font-weight: 600 }
code { background: var(--tint); padding: 2px 4px; overflow-wrap: anywhere }
a:focus-visible { outline: 3px solid var(--ink); outline-offset: 2px }
"""
PAGE = Template("""<!doctype html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<title>Leafturn: a season on an invented district network</title>
<style>$style</style>
</head>
<body>
<h1>A season on an invented district network</h1>
<p>Two grower groups on the open ocean, two past seasons and 21 live weeks. $observations observations and
$station_days station days were taken in as they would have arrived; $signals signals came of them. Ten weeks
were signed, and $delivered digests delivered by real mail. Everything here is invented.</p>

<h2>Digests to read</h2>
<p>As they were delivered. Their links work while <code>leafturn serve</code> runs.</p>
<div class="wide"><table>
<thead><tr><th scope="col">Week</th><th scope="col">Digest</th><th scope="col">What it shows</th></tr></thead>
<tbody>$kept</tbody></table></div>

<h2>What was hidden, and what the mail says of it</h2>
<p>Leafturn never reads this list. <em>Found</em> and <em>flagged</em> mean that a reader in that place was told,
in those weeks, by a mail that arrived. <em>Waiting</em> means that Leafturn has no rule of that kind yet.</p>
<div class="wide"><table>
<thead><tr><th scope="col">Name</th><th scope="col">Outcome</th><th scope="col">Weeks</th>
<th scope="col">What was added</th></tr></thead>
<tbody>$planted</tbody></table></div>

<h2>Every week</h2>
<div class="wide"><table>
<thead><tr><th scope="col">Digest</th><th scope="col">Signals</th><th scope="col">Statements</th>
<th scope="col">Readers with something to look at</th><th scope="col">Delivered</th></tr></thead>
<tbody>$weeks</tbody></table></div>

<h2>What to do next</h2>
<ul>
<li>Look at the evidence behind a week:<br><code>leafturn edition show $edition --settings $settings</code></li>
<li>Take a reader's digest back to its rows and rules:<br>
<code>leafturn trail $edition $reader --settings $settings</code></li>
<li>Open the links in the digests:<br><code>leafturn serve --settings $settings</code></li>
<li>Start with files of your own; the ones in <code>$files</code> are examples of every kind:<br>
<code>leafturn init</code>, then <code>leafturn take FILE</code></li>
</ul>
<p class="quiet">The same numbers, for programs: <a href="summary.json">summary.json</a>.</p>
</body>
</html>
""")


def write(
    path: Path, summary: Mapping[str, Any], kept: Sequence[Kept], weeks: Iterable[Mapping[str, Any]], **names: str
) -> None:
    """The page, beside the folder of kept digests; `names` are those of the commands at its end."""
    counts = {name: f"{value:,}" for name, value in summary.items() if isinstance(value, int)}
    text = PAGE.substitute(
        counts,
        style=STYLE,
        kept="\n".join(map(_kept, kept)),
        planted="\n".join(_planted(event, summary) for event in EVENTS),
        weeks="\n".join(map(_week, weeks)),
        **{name: escape(value) for name, value in names.items()},
    )
    path.write_text(text, encoding="utf-8")


def outcome(event: Event, summary: Mapping[str, Any]) -> str:
    """What became of an event, in a word or two."""
    if event.artefact:
        return "flagged" if event.name in summary["artefacts_flagged"] else "not flagged"
    return next(word for word in ("found", "missed", "waiting") if event.name in summary[f"planted_{word}"])


def _kept(kept: Kept) -> str:
    links = f'<a href="slips/{kept.name}.html">{escape(kept.subject)}</a>'
    links += f' <a class="quiet" href="slips/{kept.name}.txt">as text</a>'
    return f"<tr><td>{kept.week}<br>{kept.district.title()}</td><td>{links}</td><td>{escape(kept.shows)}</td></tr>"


def _planted(event: Event, summary: Mapping[str, Any]) -> str:
    weeks = event.weeks[0] if len(event.weeks) == 1 else f"{event.weeks[0]} to {event.weeks[-1]}"
    cells = (f"<code>{event.name}</code>", outcome(event, summary), weeks, escape(event.adds))
    return "<tr>" + "".join(f"<td>{cell}</td>" for cell in cells) + "</tr>"


def _week(week: Mapping[str, Any]) -> str:
    numbers = (week["signals"], week["statements"], week["with_asks"], week["delivered"])
    cells = "".join(f'<td class="n">{"draft only" if n is None else n}</td>' for n in numbers)
    return f"<tr><td>{escape(week['edition'])}</td>{cells}</tr>"
