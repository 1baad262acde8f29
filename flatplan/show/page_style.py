"""How the report looks, on a screen and on A4."""

from __future__ import annotations

# Colours as in style.py: ink for text, dark red for what fails, and words beside every colour.
CSS = """
:root { --ink: #11183c; --grey: #595f6b; --line: #cfd3da; --wash: #f4f5f8; --bad: #7a1030; --good: #1f5a4c; }
* { box-sizing: border-box; }
body { margin: 0 auto; max-width: 52rem; padding: 1.5rem 1.5rem 3rem; color: var(--ink); background: #fff;
  font: 15px/1.5 "DejaVu Sans", Verdana, "Segoe UI", sans-serif; }
header { border-bottom: 3px solid var(--ink); margin-bottom: 1.2rem; padding-bottom: .7rem; }
h1 { font-size: 1.55rem; line-height: 1.2; margin: 0 0 .3rem; overflow-wrap: anywhere; }
h2 { font-size: 1.12rem; margin: 2rem 0 .6rem; padding-bottom: .2rem; border-bottom: 1px solid var(--line); break-after: avoid; }
h3 { font-size: .98rem; margin: 1.2rem 0 .4rem; break-after: avoid; }
p, ul, ol { margin: .5rem 0; } li { margin: .25rem 0; }
.lead { font-size: 1.04rem; }
.small, figcaption, caption, footer { color: var(--grey); font-size: .86rem; }
.wide { overflow-x: auto; }
table { border-collapse: collapse; width: 100%; margin: .9rem 0; font-size: .87rem; }
caption { text-align: left; padding: 0 0 .35rem; }
th, td { text-align: left; vertical-align: top; padding: .26rem .55rem; border-bottom: 1px solid var(--line); }
thead th { border-bottom: 1.5px solid var(--ink); vertical-align: bottom; }
tbody th { font-weight: normal; }
.n { text-align: right; font-variant-numeric: tabular-nums; white-space: nowrap; }
thead .n { white-space: normal; }
.facts th { width: 46%; }
td small { display: block; color: var(--grey); white-space: nowrap; }
.rates td { white-space: nowrap; }
.rates td, .rates th { padding: .16rem .45rem; }
.rates tbody tr:nth-child(6n) > * { border-bottom-color: var(--grey); }
.numbers { display: grid; grid-template-columns: repeat(auto-fit, minmax(13.5rem, 1fr)); gap: .6rem; margin: 1rem 0; padding: 0; }
.numbers > div { border: 1px solid var(--line); border-top: 3px solid var(--ink); padding: .45rem .65rem; break-inside: avoid; }
.numbers dt { color: var(--grey); font-size: .82rem; } .numbers dd { margin: 0; font-size: 1.15rem; font-weight: bold; }
.numbers dd small { display: block; font-weight: normal; font-size: .8rem; color: var(--grey); }
.status { display: grid; grid-template-columns: repeat(auto-fit, minmax(13rem, 1fr)); gap: .6rem;
  margin: 1rem 0; padding: 0; list-style: none; }
.status li { margin: 0; border-left: 5px solid var(--grey); background: var(--wash); padding: .45rem .7rem; break-inside: avoid; }
.status .good { border-left-color: var(--good); }
.status .bad { border-left-color: var(--bad); border-left-style: double; border-left-width: 7px; }
.status strong { display: block; }
.bad-word { color: var(--bad); font-weight: bold; } .good-word { color: var(--good); font-weight: bold; }
.plain-word { color: var(--grey); }
.warning { border: 2px solid var(--bad); padding: .6rem .9rem; margin: 1rem 0; break-inside: avoid; }
figure { margin: 1rem 0; break-inside: avoid; } figure img { width: 100%; height: auto; display: block; }
.formula { margin: .2rem 0; } .formula img { display: block; max-width: 100%; }
table.narrow { width: auto; min-width: 26rem; }
.series td, .series th { vertical-align: middle; white-space: nowrap; }
.sign td, .sign th { height: 2.6rem; border: 1px solid var(--line); }
footer { margin-top: 2.5rem; border-top: 1px solid var(--line); padding-top: .6rem; }
@page { size: A4; margin: 16mm 15mm 18mm; @bottom-right { content: counter(page) " / " counter(pages); font: 8pt sans-serif; } }
@media print {
  html { font-size: 9.6pt; }
  body { max-width: none; padding: 0; font-size: 1rem; line-height: 1.42; }
  .wide { overflow: visible; } table.facts, table.narrow { break-inside: avoid; } caption { break-inside: avoid; break-after: avoid; }
  thead { display: table-header-group; } tr { break-inside: avoid; }
  h2 { margin-top: 1.3rem; } .status li { background: none; border-top: 1px solid var(--line); border-bottom: 1px solid var(--line);
    border-right: 1px solid var(--line); }
}
"""
