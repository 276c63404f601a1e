"""The look of pages and plots: one palette, told apart by lightness and line as well as by hue."""

from __future__ import annotations

from typing import Any

HEAD, CRANK = "#0b5c7a", "#b3500c"  # dark petrol and burnt orange: apart in hue and in print
END_COLOURS = {"head": HEAD, "crank": CRANK}
THEORY, LINE, INK, FAINT = "#6b6f76", "#8a8f98", "#1d232b", "#d9dde2"
SUCTION_LOSS, DISCHARGE_LOSS = "#7fb8c9", "#e8b27d"
IDEAL, REST = "#4d5866", "#b9a7c9"

RC: dict[str, Any] = {
    "svg.fonttype": "none",
    "svg.hashsalt": "pvcard",
    "font.family": "sans-serif",
    "font.size": 9,
    "axes.titlesize": 10,
    "axes.titleweight": "bold",
    "axes.titlelocation": "left",
    "axes.labelcolor": INK,
    "axes.edgecolor": LINE,
    "axes.spines.top": False,
    "axes.spines.right": False,
    "axes.grid": True,
    "axes.axisbelow": True,
    "grid.color": FAINT,
    "grid.linewidth": 0.6,
    "xtick.color": INK,
    "ytick.color": INK,
    "text.color": INK,
    "legend.frameon": False,
    "legend.fontsize": 8,
    "hatch.linewidth": 0.5,
}

CSS = """
:root{--ink:#1d232b;--soft:#56606c;--paper:#ffffff;--card:#f4f6f8;--rule:#d5dae0;--accent:#0b5c7a;
--act:#8c1c13;--watch:#7a4b00;--note:#3d4a5a}
@media (prefers-color-scheme:dark){:root{--ink:#e8ebef;--soft:#a9b3bf;--paper:#14181d;
--card:#1d232a;--rule:#39424d;--accent:#79c3dc;--act:#ff9a8f;--watch:#f0c274;--note:#b8c4d2}}
*{box-sizing:border-box}
body{margin:0 auto;padding:1.2rem;max-width:1500px;background:var(--paper);color:var(--ink);
font:16px/1.5 system-ui,-apple-system,"Segoe UI","Liberation Sans",sans-serif}
h1{font-size:1.5rem;margin:0 0 .2rem}h2{font-size:1.15rem;margin:2rem 0 .6rem;
border-bottom:2px solid var(--accent);padding-bottom:.2rem}h3{font-size:1rem;margin:1.2rem 0 .4rem}
p{margin:.4rem 0}.soft{color:var(--soft)}a{color:var(--accent)}
.facts{display:flex;flex-wrap:wrap;gap:.2rem 1.6rem;padding:0;margin:.4rem 0;list-style:none}
.ends{display:grid;grid-template-columns:repeat(auto-fit,minmax(290px,1fr));gap:.8rem}
.end{background:var(--card);border-left:4px solid var(--accent);padding:.6rem .9rem;
border-radius:0 6px 6px 0}
.end.crank{border-left-style:double;border-left-width:6px}
.end b.big{font-size:1.35rem;display:block}
.finding{border:1px solid var(--rule);border-left-width:8px;padding:.5rem .9rem;margin:.5rem 0;
border-radius:4px}
.finding .word{font-weight:700;text-transform:uppercase;letter-spacing:.05em;margin-right:.5rem}
.act{border-left-color:var(--act)}.act .word{color:var(--act)}
.watch{border-left-color:var(--watch)}.watch .word{color:var(--watch)}
.note .word{color:var(--note)}
.plots{display:grid;grid-template-columns:repeat(auto-fit,minmax(min(100%,540px),1fr));gap:.8rem}
figure{margin:0;background:#fff;border:1px solid var(--rule);border-radius:6px;padding:.3rem}
figure svg{width:100%;height:auto;display:block}
.wide{max-width:900px}
.scroll{overflow-x:auto}
table{border-collapse:collapse;width:100%;font-size:.92rem;font-variant-numeric:tabular-nums}
th,td{padding:.25rem .6rem;border-bottom:1px solid var(--rule);text-align:right;white-space:nowrap}
th:first-child,td:first-child{text-align:left;white-space:normal;min-width:11rem}
thead th{position:sticky;top:0;background:var(--paper);border-bottom:2px solid var(--rule)}
tr.group th{text-align:left;color:var(--accent);padding-top:.9rem}
details{margin:.6rem 0}summary{cursor:pointer}
.caution{background:var(--card);padding:.6rem .9rem;border-radius:6px}
@media print{body{max-width:none;padding:0;font-size:10pt;background:#fff;color:#000}
h2{break-after:avoid}figure,.end,.finding,tr{break-inside:avoid}thead th{position:static}
.plots{grid-template-columns:1fr 1fr}details>*{display:block}.scroll{overflow:visible}
table{font-size:7.5pt}th,td{padding:.12rem .3rem}@page{margin:14mm}}
"""
