/** The page's own style sheet, for screen and paper; colour is never the only sign. */
export const PAGE_STYLE = `
:root { color-scheme: light; --ink: #23272b; --soft: #59636b; --line: #cfd6d3; --wash: #f3f5f2;
  --mark: #1d5c63; --warm: #9a4a12; }
* { box-sizing: border-box; }
body { margin: 0 auto; padding: 2rem 1.5rem 4rem; max-width: 68rem; color: var(--ink);
  background: #fff; font: 1rem/1.55 Georgia, "Times New Roman", serif; }
h1, h2, h3, h4, th, caption, figcaption, svg text, .tag, nav, dt {
  font-family: "Helvetica Neue", Arial, sans-serif; }
h1 { font-size: 1.9rem; line-height: 1.2; margin: 0 0 .4rem; overflow-wrap: anywhere; }
h2 { font-size: 1.35rem; margin: 3rem 0 .8rem; padding-top: .8rem;
  border-top: 3px solid var(--mark); }
h3 { font-size: 1.1rem; margin: 2rem 0 .5rem; }
h4 { font-size: .98rem; margin: 1.4rem 0 .3rem; }
p, ul, dl { max-width: 46rem; }
a { color: var(--mark); }
nav ol { columns: 2; padding-left: 1.4rem; margin: 1rem 0 0; font-size: .92rem; }
dl { display: grid; grid-template-columns: max-content 1fr; gap: .25rem 1.2rem; margin: 1rem 0; }
dt { color: var(--soft); font-size: .9rem; padding-top: .1rem; }
dd { margin: 0; overflow-wrap: anywhere; }
code { font: .86em "DejaVu Sans Mono", Menlo, Consolas, monospace; }
.table { overflow-x: auto; margin: 1.1rem 0; }
table { border-collapse: collapse; min-width: 26rem; font-size: .9rem; font-variant-numeric:
tabular-nums; }
caption { text-align: left; font-weight: 600; font-size: .92rem; padding-bottom: .45rem; }
th, td { padding: .3rem .6rem; text-align: left; vertical-align: top;
  border-bottom: 1px solid var(--line); }
thead th { border-bottom: 2px solid var(--soft); font-size: .82rem; vertical-align: bottom; }
tbody th { font-weight: 500; font-size: .88rem; min-width: 8.5rem; }
td.phrase { white-space: nowrap; }
th.number, td.number { text-align: right; }
td.number, .heat th { white-space: nowrap; }
.heat td { min-width: 4rem; text-align: center; border: 1px solid #fff; }
.heat-0 { background: #f6f7f4; } .heat-1 { background: #dfe9e4; } .heat-2 { background: #c2d8d1; }
.heat-3 { background: #9dc2bb; } .heat-4 { background: #75a9a4; } .heat-5 { background: #579490; }
.tag { font-size: .72rem; font-weight: 600; padding: .12rem .5rem; border: 1px solid currentColor;
  border-radius: .2rem; vertical-align: middle; white-space: nowrap; }
.confirmatory { color: var(--mark); } .exploratory { color: var(--warm); }
.none, .note { color: var(--soft); font-size: .93rem; }
.finding { border-left: 4px solid var(--mark); background: var(--wash); margin: .9rem 0;
  padding: .7rem 1rem; max-width: 46rem; }
.finding p { margin: .2rem 0; }
.not-estimable { border-left: 4px solid var(--warm); padding: .3rem .9rem; max-width: 46rem; }
figure { margin: 1.4rem 0; max-width: 44rem; }
figcaption { color: var(--soft); font-size: .85rem; }
svg { display: block; width: 100%; height: auto; }
svg text { font-size: 12.5px; fill: var(--ink); }
svg text.axis { fill: var(--soft); }
.grid { stroke: var(--line); fill: none; }
.interval { stroke: var(--mark); stroke-width: 2; fill: none; }
.mean { fill: var(--mark); }
.joined { stroke: var(--mark); stroke-width: 1; stroke-dasharray: 4 4; fill: none; opacity: .7; }
@media print {
  body { padding: 0; font-size: 10.5pt; max-width: none; }
  nav { display: none; }
  h2, h3, h4, caption { break-after: avoid; }
  table, figure, .finding { break-inside: avoid; }
  .table { overflow: visible; }
  table { font-size: 8pt; }
  th, td { padding: .15rem .35rem; }
  tbody th { font-size: 8pt; min-width: 0; }
  .heat td { -webkit-print-color-adjust: exact; print-color-adjust: exact; }
}
`;
