"""The page as HTML: one file, nothing fetched, every word from outside escaped."""

from __future__ import annotations

from typing import Final

from jinja2 import Environment, StrictUndefined
from markupsafe import Markup

from trimmer.report.drawing import drawings
from trimmer.report.page import Page
from trimmer.report.sheet import picture_svg

TEMPLATE: Final = """\
<!DOCTYPE html>
<html lang="en">
<head>
<meta charset="utf-8">
<meta name="viewport" content="width=device-width, initial-scale=1">
<meta http-equiv="Content-Security-Policy" content="default-src 'none'; style-src 'unsafe-inline'">
<title>{{ page.title }}</title>
<style>
@page { size: A4; margin: 12mm; }
body { font: 10.5px/1.4 "DejaVu Sans", Verdana, sans-serif; color: #1a1a1a; background: #fff;
  max-width: 190mm; margin: 8mm auto; padding: 0 4mm; overflow-wrap: anywhere; }
header { display: flex; justify-content: space-between; align-items: baseline; gap: 1em;
  border-bottom: 1px solid #1a1a1a; }
h1 { font-size: 19px; margin: 0; }
h2 { font-size: 11px; margin: .7em 0 .1em; }
header p { margin: 0 0 .4em; color: #595959; }
.result { font-size: 17px; font-weight: bold; color: #1a1a1a; white-space: nowrap; }
.tables { display: grid; grid-template-columns: 1fr 1fr; gap: 2em; margin: .6em 0; }
table { border-collapse: collapse; align-self: start; }
th { text-align: left; font-weight: normal; color: #595959; padding: 0 1em 0 0; white-space: nowrap;
  vertical-align: top; }
td { padding: 0; }
.pictures { display: grid; grid-template-columns: 1fr 1fr; gap: .3em 1em; }
figure { margin: 0; break-inside: avoid; }
figure svg { width: 100%; height: auto; }
section p { margin: 0; }
footer { border-top: 1px solid #1a1a1a; margin-top: .8em; padding-top: .3em; }
</style>
</head>
<body>
<header>
<div><h1>{{ page.title }}</h1><p>{{ page.subtitle }}</p></div>
<p class="result">{{ page.result }}</p>
</header>
<div class="tables">
{%- for rows in (page.facts, page.figures) %}
<table>
{%- for name, said in rows %}
<tr><th scope="row">{{ name }}</th><td>{{ said }}</td></tr>
{%- endfor %}
</table>
{%- endfor %}
</div>
<div class="pictures">
{%- for described, svg in pictures %}
<figure role="img" aria-label="{{ described }}">{{ svg }}</figure>
{%- endfor %}
</div>
{%- for section in page.sections %}
<section><h2>{{ section.heading }}</h2>
{%- for text in section.lines %}
<p>{{ text }}</p>
{%- endfor %}
</section>
{%- endfor %}
<footer><strong>Cautions.</strong> {{ page.cautions }}</footer>
</body>
</html>
"""


def html_bytes(page: Page) -> bytes:
    """Write a page as HTML, UTF-8."""
    environment = Environment(autoescape=True, undefined=StrictUndefined)
    # Only what is drawn here is taken as it is; matplotlib escapes the words it draws.
    pictures = [
        (told, Markup(picture_svg(draw, f"picture{n}")))
        for n, (told, draw) in enumerate(drawings(page))
    ]
    text = environment.from_string(TEMPLATE).render(page=page, pictures=pictures)
    return text.encode("utf-8", errors="replace")
