"""How a report looks: ink on white, A4 when printed, one column on a small screen. Words carry the meaning."""

STYLE = """\
@page { size: A4; margin: 14mm 14mm 16mm; }
:root { color-scheme: light; }
* { box-sizing: border-box; }
body { margin: 0; color: #1a1a1a; background: #fff; line-height: 1.4; font-size: .94rem;
  font-family: "DejaVu Sans", Verdana, "Liberation Sans", Arial, sans-serif; overflow-wrap: anywhere; }
main { max-width: 62rem; margin: 0 auto; padding: 1rem 1rem 3rem; }
h1 { font-size: 1.6rem; line-height: 1.2; margin: 0 0 .2rem; }
h2 { font-size: 1.15rem; margin: 1.8rem 0 .5rem; padding-bottom: .15rem; border-bottom: 2px solid #1a1a1a; }
h3 { font-size: 1rem; margin: 1.2rem 0 .4rem; }
p { margin: .4rem 0; }
a { color: #15255c; }
.what { margin: 0; color: #404040; }
.verdict { margin: .9rem 0; padding: .6rem .8rem; border: 2px solid #1a1a1a; font-size: 1.05rem; }
.verdict strong { display: block; font-size: 1.35rem; letter-spacing: .04em; }
.verdict.is-restrict { border-style: dashed; }
.verdict.is-reject { border-width: 2px 2px 2px 12px; }
.caution { font-size: .85rem; color: #404040; border-left: 4px solid #8c8c8c; padding-left: .6rem; }
.note { font-size: .85rem; color: #404040; }
table { border-collapse: collapse; width: 100%; font-size: .87rem; }
caption { text-align: left; font-size: .87rem; color: #404040; padding: .3rem 0; }
th, td { text-align: left; vertical-align: top; padding: .22rem .5rem .22rem 0; border-bottom: 1px solid #c9c5bb; }
thead th { border-bottom: 1px solid #1a1a1a; vertical-align: bottom; }
th.number, td.number { text-align: right; font-variant-numeric: tabular-nums; white-space: nowrap;
  overflow-wrap: normal; }
td { min-width: 5.5rem; }
td.number, td.short { min-width: 0; }
td.short, th.short { white-space: nowrap; overflow-wrap: normal; }
thead th { overflow-wrap: normal; }
tbody th { font-weight: 600; min-width: 9rem; }
tbody th.number { min-width: 0; }
thead th.number { white-space: normal; }
.shots tbody th { min-width: 4.5rem; }
.shots td:nth-child(2) { min-width: 6.5rem; }
.shots td:last-child { min-width: 12rem; }
.why { display: block; font-size: .9em; color: #404040; }
.pairs th { width: 14rem; min-width: 0; }
.hash { font-family: "DejaVu Sans Mono", "Liberation Mono", monospace; font-size: .78rem; word-break: break-all; }
.wide { overflow-x: auto; margin: .6rem 0; }
.figures { display: grid; grid-template-columns: repeat(auto-fit, minmax(min(100%, 21rem), 1fr)); gap: 1rem 1.2rem; }
figure { margin: 0; }
figcaption { font-size: .87rem; }
figcaption strong { display: block; }
svg { display: block; width: 100%; height: auto; overflow: visible; }
svg * { stroke-linejoin: round; stroke-linecap: butt; }
.finding { border-left: 4px solid #8c8c8c; padding: .1rem 0 .1rem .7rem; margin: .7rem 0; }
.finding.is-reject { border: 0; border-left: 12px solid #1a1a1a; }
.finding.is-restrict { border-left: 6px dashed #1a1a1a; }
.finding p { margin: .15rem 0; }
.weight { font-weight: 700; text-transform: uppercase; letter-spacing: .03em; }
ul { margin: .4rem 0; padding-left: 1.3rem; }
pre { overflow-x: auto; font-size: .78rem; border: 1px solid #c9c5bb; padding: .5rem; }
footer { margin-top: 2rem; font-size: .8rem; color: #404040; }
.choice { position: absolute; opacity: 0; }
.order { display: flex; flex-wrap: wrap; gap: .3rem; align-items: baseline; font-size: .87rem; margin: .5rem 0; }
.order .words { margin-right: .3rem; }
.order label { border: 1px solid #8c8c8c; padding: .15rem .5rem; cursor: pointer; }
.sorted { display: none; }
@media (max-width: 30rem) {
  main { padding: .6rem .6rem 2rem; }
  .pairs th, .pairs td { display: block; width: auto; border-bottom: 0; padding-bottom: 0; }
  .pairs td { border-bottom: 1px solid #c9c5bb; padding-bottom: .3rem; }
}
@media print {
  html { font-size: 9.5pt; }
  body { line-height: 1.32; }
  th, td { padding: .12rem .5rem .12rem 0; }
  main { max-width: none; padding: 0; }
  h2, h3, h4, caption { break-after: avoid; }
  figure, tr, .verdict, .finding, .order { break-inside: avoid; }
  thead { display: table-header-group; break-inside: avoid; }
  tbody tr:first-child { break-before: avoid; }
  .wide { overflow: visible; }
  .figures { display: grid; grid-template-columns: 1fr 1fr; gap: 5mm; }
  details, .order, .screen { display: none; }
  a { color: inherit; text-decoration: none; }
}
"""
