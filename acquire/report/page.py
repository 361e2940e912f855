"""The page itself: HTML with everything inside it, pictures included, so that one file can be handed over."""

from __future__ import annotations

from base64 import b64encode
from collections.abc import Mapping, Sequence
from dataclasses import dataclass
from html import escape
from string import Template

PAGE = Template("""<!doctype html>
<html lang="en"><head><meta charset="utf-8"><meta name="viewport" content="width=device-width">
<title>$title</title>
<style>
body { font: 16px/1.5 Georgia, serif; max-width: 52rem; margin: 2rem auto; padding: 0 1rem; color: #222; }
h1 { font-size: 1.6rem; margin-bottom: 0; } h2 { font-size: 1.15rem; margin-top: 2.2rem; }
p.sub { color: #666; margin-top: .2rem; }
figure { margin: 1rem 0; } img { max-width: 100%; } figcaption { color: #555; font-size: .9rem; }
table { border-collapse: collapse; font-size: .9rem; } td, th { padding: .2rem .8rem .2rem 0; text-align: left; }
th { border-bottom: 1px solid #999; } td.number { text-align: right; font-variant-numeric: tabular-nums; }
.finding { border-left: 4px solid #999; padding: .1rem 0 .1rem 1rem; margin: 1rem 0; }
.finding.caution { border-color: #b08900; } .finding.halt { border-color: #b3261e; }
.finding p { margin: .2rem 0; }
</style></head><body>
<h1>$title</h1><p class="sub">$subtitle</p>
$body
</body></html>
""")


@dataclass(frozen=True)
class Picture:
    """A PNG and what it shows."""

    caption: str
    png: bytes


def picture(p: Picture) -> str:
    """An embedded figure with its caption, which also stands in for it where it cannot be seen."""
    data = b64encode(p.png).decode("ascii")
    caption = escape(p.caption)
    image = f'<img alt="{caption}" src="data:image/png;base64,{data}">'
    return f"<figure>{image}<figcaption>{caption}</figcaption></figure>"


def table(head: Sequence[str], rows: Sequence[Sequence[str]]) -> str:
    """A table; cells that begin with a digit or a sign are set flush right."""
    titles = "".join(f"<th>{escape(h)}</th>" for h in head)
    lines = []
    for row in rows:
        cells = "".join(
            f'<td class="number">{escape(c)}</td>' if c[:1].isdigit() or c[:1] in "-−+" else f"<td>{escape(c)}</td>"
            for c in row
        )
        lines.append(f"<tr>{cells}</tr>")
    return f"<table><thead><tr>{titles}</tr></thead><tbody>{''.join(lines)}</tbody></table>"


def findings(entries: Sequence[Mapping[str, str]]) -> str:
    """The findings that stood when the scan ended, worst first."""
    if not entries:
        return "<p>None of the checks found anything.</p>"
    order = {"halt": 0, "caution": 1, "note": 2}
    worst_first = sorted(entries, key=lambda f: (order[f["severity"]], f["code"]))
    return "".join(finding({k: escape(str(v)) for k, v in f.items()}) for f in worst_first)


def finding(f: Mapping[str, str]) -> str:
    """One finding, its texts already escaped."""
    return (
        f'<div class="finding {f["severity"]}"><p><b>{f["severity"]}: {f["code"]}</b>, {f["summary"]}</p>'
        f"<p>Consequence: {f['consequence']}</p><p>Remedy: {f['remedy']}</p></div>"
    )


def section(title: str, *parts: str) -> str:
    """A headed part of the page."""
    return f"<h2>{escape(title)}</h2>" + "".join(parts)


def page(title: str, subtitle: str, *sections: str) -> str:
    """The whole file."""
    return PAGE.substitute(title=escape(title), subtitle=escape(subtitle), body="\n".join(sections))
