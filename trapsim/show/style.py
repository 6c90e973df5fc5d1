"""The style of the page: ink on paper, one column, made to be read on a screen and printed on A4."""

from __future__ import annotations

from trapsim.show.look import BAND, INK, LOOKS, QUIET, RULE

STYLE = f"""
:root {{ color-scheme: light; }}
* {{ box-sizing: border-box; }}
body {{ margin: 0; background: #fff; color: {INK}; font: 15px/1.5 "DejaVu Sans", Verdana, "Segoe UI", sans-serif; }}
main {{ max-width: 1000px; margin: 0 auto; padding: 28px 24px 40px; }}
header {{ border-bottom: 3px solid {INK}; padding-bottom: 12px; }}
h1 {{ font-size: 26px; line-height: 1.25; margin: 0 0 6px; overflow-wrap: anywhere; }}
h2 {{ font-size: 17px; margin: 34px 0 10px; padding-bottom: 4px; border-bottom: 1px solid {RULE}; }}
h3 {{ font-size: 14px; margin: 20px 0 6px; color: {QUIET}; }}
p {{ margin: 6px 0 10px; max-width: 80ch; }}
.quiet, figcaption {{ color: {QUIET}; font-size: 13px; }}
.status {{ display: inline-block; padding: 1px 10px; border: 1.5px solid {LOOKS["z"].colour}; border-radius: 3px;
  font-weight: 700; font-size: 13px; }}
.status.open {{ border: 2px dashed {LOOKS["y"].colour}; }}
.wide {{ overflow-x: auto; margin: 8px 0 14px; }}
table {{ border-collapse: collapse; font-size: 14px; font-variant-numeric: tabular-nums; }}
th, td {{ text-align: left; padding: 4px 14px 4px 0; vertical-align: top; font-weight: 400; }}
thead th {{ color: {QUIET}; font-size: 12.5px; border-bottom: 1.5px solid {INK}; }}
tbody tr {{ border-bottom: 1px solid {RULE}; }}
tbody th {{ white-space: nowrap; }}
.numbers {{ width: 100%; }}
.numbers td {{ white-space: nowrap; font-weight: 600; }}
.numbers tr.beside th, .numbers tr.beside td {{ color: {QUIET}; font-weight: 400; font-size: 13px; padding-top: 1px; }}
.numbers tr:has(+ tr.beside) {{ border-bottom: none; }}
.numbers tr.beside th {{ padding-left: 14px; }}
.small {{ font-size: 12.5px; }} .small td {{ font-weight: 400; }}
.facts th {{ color: {QUIET}; }} .steps {{ width: 100%; }}
.steps td, .facts td {{ overflow-wrap: anywhere; }}
.three td:last-child {{ color: {QUIET}; font-size: 13px; }}
.pair {{ display: grid; grid-template-columns: repeat(auto-fit, minmax(400px, 1fr)); gap: 0 36px; }}
.pair > div {{ min-width: 0; }}
.heed {{ list-style: none; margin: 14px 0 0; padding: 0; }}
.heed li {{ background: #fbf0e8; border-left: 5px solid {LOOKS["y"].colour}; padding: 6px 12px; margin: 6px 0; }}
figure {{ margin: 18px 0 30px; break-inside: avoid; }}
figure img {{ display: block; width: 100%; max-width: 900px; height: auto; margin: 0 auto; }}
svg.sequence {{ display: block; width: 100%; height: auto; margin: 10px 0; font-family: inherit; }}
pre {{ background: {BAND}; padding: 12px 14px; font: 12.5px/1.45 "DejaVu Sans Mono", Consolas, monospace;
  white-space: pre-wrap; overflow-wrap: anywhere; }}
footer {{ margin-top: 36px; border-top: 3px solid {INK}; padding-top: 10px; }}
.safety {{ border: 1.5px solid {INK}; padding: 10px 14px; font-size: 13.5px; max-width: none; break-inside: avoid; }}
@media print {{
  @page {{ size: A4; margin: 14mm; }}
  body {{ font-size: 10.5pt; }} main {{ max-width: none; padding: 0; }}
  h2 {{ break-after: avoid; }} tr, li, svg.sequence {{ break-inside: avoid; }}
  * {{ -webkit-print-color-adjust: exact; print-color-adjust: exact; }}
}}
"""
