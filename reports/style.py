"""How figures look: colours that survive grey and colour-blindness, marks, sizes.

Strong and weak errors differ by mark, filling and dashes as well as by colour; schemes by mark and
by how dark they are. The page turns these colours into its own, light or dark, by name.
"""

from typing import Any

INK = "#20262e"
MUTED = "#5b6570"
RULE = "#cfd6db"
ACCENT = "#0b6b74"
OCHRE = "#a3631c"
PLUM = "#764686"
NAMES = {INK: "ink", MUTED: "muted", RULE: "rule", ACCENT: "accent", OCHRE: "ochre", PLUM: "plum"}

STRONG = (ACCENT, "o")
WEAK = ((INK, "s"), (OCHRE, "^"), (PLUM, "D"), (MUTED, "v"), (INK, "P"), (OCHRE, "X"))
SCHEMES = ((ACCENT, "o"), (OCHRE, "s"), (PLUM, "^"), (INK, "D"), (MUTED, "v"))

MARK = 5.0  # points
WIDTH, HEIGHT = 5.4, 3.7  # inches; the page shows a figure at some 520 pixels
FRAME = (0.135, 0.14, 0.84, 0.82)
SETTINGS: Any = {  # by names that Matplotlib spells out as a type
    "font.size": 9.5,
    "text.color": INK,
    "axes.labelcolor": INK,
    "axes.edgecolor": MUTED,
    "axes.linewidth": 0.8,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "grid.color": RULE,
    "grid.linewidth": 0.6,
    "xtick.bottom": False,  # the grid is mark enough, and each mark takes time
    "ytick.left": False,
    "xtick.labelcolor": INK,
    "ytick.labelcolor": INK,
    "lines.linewidth": 1.3,
    "lines.markersize": MARK,
    "legend.frameon": False,
    "legend.fontsize": 8.5,
    "text.parse_math": False,  # a dollar in a user's name is a dollar
    "svg.fonttype": "none",  # text stays text: it can be searched, and set in the page's type
    "svg.hashsalt": "sdebench",
    "pdf.fonttype": 3,
}
