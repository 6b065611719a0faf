"""How a page looks, on a screen and on paper."""

STYLE = """
:root { color-scheme: light; }
* { box-sizing: border-box; }
body {
  margin: 0 auto; max-width: 72rem; padding: 1.5rem 1rem 3rem; background: #fff; color: #1a1a1a;
  font: 1rem/1.5 system-ui, "Segoe UI", Roboto, "Helvetica Neue", Arial, sans-serif; overflow-wrap: break-word;
}
h1 { margin: 0 0 1rem; font-size: 1.6rem; line-height: 1.25; }
h2 { margin: 2.25rem 0 .5rem; padding-bottom: .2rem; border-bottom: 1px solid #999; font-size: 1.2rem; line-height: 1.3; }
h2:target { background: #eef3f8; }
p, ul { margin: .4rem 0; max-width: 60rem; }
ul { padding-left: 1.3rem; }
a { color: #0b4f8a; }
.status { padding: .5rem .8rem; border: 1px solid #555; border-left-width: .4rem; }
.failure { padding: .5rem .8rem; border: 1px dashed #1a1a1a; border-left: .4rem double #1a1a1a; background: #f4f4f4; }
aside { margin: 1rem 0; padding: .4rem .8rem; border: 2px solid #8a5a00; background: #fdf8ee; }
nav { margin: 1rem 0; }
nav ul { columns: 2 20rem; list-style: none; padding: 0; }
.frame { margin: .6rem 0 1rem; overflow-x: auto; }
table { border-collapse: collapse; font-size: .875rem; line-height: 1.35; font-variant-numeric: tabular-nums lining-nums; }
caption { padding: .2rem 0; text-align: left; font-weight: 600; }
th, td { padding: .2rem .6rem; border-bottom: 1px solid #ccc; text-align: left; vertical-align: top; }
th { font-weight: 600; }
thead th { border-bottom: 2px solid #555; vertical-align: bottom; }
tbody th { font-weight: 400; white-space: nowrap; }
.figure { text-align: right; white-space: nowrap; }
figure { margin: 1rem 0; }
figure svg { display: block; max-width: 100%; height: auto; }
figcaption { margin-top: .3rem; font-size: .9rem; }
footer { margin-top: 2.5rem; border-top: 1px solid #999; font-size: .85rem; }
@page { size: A4; margin: 15mm; }
@page broad { size: A4 landscape; margin: 12mm; }
@media print {
  body { max-width: none; padding: 0; color: #000; font-size: 10pt; }
  h1 { font-size: 15pt; }
  h2 { margin-top: 14pt; font-size: 12pt; }
  h2, h2 + p { break-after: avoid; }
  a { color: #000; text-decoration: none; }
  h2:target, .failure, aside { background: none; }
  .status, .failure, aside, figure, .whole, tr, li { break-inside: avoid; }
  caption { break-after: avoid; }
  .frame { overflow: visible; }
  table { font-size: 8.5pt; }
  thead { display: table-header-group; }
  th, td { padding: .2em .45em; }
  .broad { page: broad; }
  .broad table { font-size: min(7.5pt, calc(1700pt / var(--letters))); }
  p { orphans: 2; widows: 2; }
  figure svg { max-height: 130mm; }
}
"""
