"""An SVG figure as part of a page: in the page's colours, with a text alternative."""

import re
from html import escape

from sdebench.reports import style


def inline_svg(svg: str, name: str, description: str) -> str:
    """Return the `<svg>` element of a Matplotlib file, fit to stand in a page beside others.

    `name` goes before its ids, which would clash with those of others; colours become the page's
    variables, so that they follow light and dark; `description` is read in its place.
    """
    element = svg[svg.index("<svg") :]
    element = re.sub(r"<metadata>.*?</metadata>", "", element, flags=re.S)
    used = set(re.findall(r'(?:url\(#|href="#)([^")]+)', element))
    element = re.sub(
        r' id="([^"]+)"', lambda m: f' id="{name}-{m[1]}"' if m[1] in used else "", element
    )
    element = re.sub(r"(url\(#|href=\"#)", rf"\g<1>{name}-", element)
    element = element.replace("fill: #ffffff", "fill: none")  # the page has its own paper
    for colour, variable in style.NAMES.items():
        element = element.replace(colour, f"var(--{variable})")
    box = re.search(r'viewBox="[^"]+"', element)
    assert box is not None
    inside = element[element.index(">") + 1 :]
    spaces = 'xmlns="http://www.w3.org/2000/svg" xmlns:xlink="http://www.w3.org/1999/xlink"'
    return f'<svg {spaces} {box[0]} role="img" aria-label="{escape(description)}">{inside}'
