"""How the report looks: on a desk, on a phone, on paper.

Knows CSS. Must not know what the page says.
"""

from __future__ import annotations

STYLE = """
:root { color-scheme: light }
* { box-sizing: border-box }
body { font: 16px/1.5 system-ui, sans-serif; color: #1c2733; background: #fff; margin: 0 auto;
  max-width: 70rem; padding: 1.5rem 1.25rem 4rem }
h1 { font-size: 1.5rem; line-height: 1.25; margin: 0 0 .25rem }
h2 { font-size: 1.25rem; line-height: 1.3; margin: 0 0 .6rem }
h3 { font-size: 1rem; margin: 1.6rem 0 .3rem }
p, li { max-width: 48rem } p { margin: .5rem 0 }
section { border-top: 1px solid #b9c4cd; margin-top: 2.5rem; padding-top: 1.5rem }
a { color: #0b5c8a }
a:focus-visible, button:focus-visible, summary:focus-visible { outline: 3px solid #0b5c8a;
  outline-offset: 2px }
.small, figcaption, .note, caption { color: #44525f; font-size: .875rem }
.note { display: block; font-weight: 400; line-height: 1.35 } td .note { max-width: 15rem }
.answer { font-size: 1.125rem; max-width: 52rem }
.verdict { border-left: .4rem solid #0b5c8a; background: #f1f5f8; padding: .6rem .9rem;
  max-width: 52rem }
.verdict.no { border-left: .4rem double #a8541a; background: #fbf4ee }
.verdict.care { border-left: .4rem dashed #6b5a00; background: #f8f6e9 }
.verdict strong { display: block }
.caution { border: 1px solid #8794a0; padding: .5rem .9rem; max-width: 52rem }
nav ol { padding-left: 1.4rem; margin: .3rem 0 }
dl { margin: .8rem 0 } dd { margin: 0; overflow-wrap: anywhere }
dl div { display: grid; grid-template-columns: 13rem 1fr; gap: .1rem 1rem; padding: .15rem 0 }
dt { color: #44525f }
dl.key { display: grid; grid-template-columns: repeat(auto-fit, minmax(9.5rem, 1fr)); gap: 1rem;
  }
dl.key div { display: block; border-top: 3px solid #1c2733; padding-top: .3rem }
dl.key dd { font-size: 1.25rem; font-weight: 600; line-height: 1.3 }
dl.key .note { font-size: .875rem }
table { border-collapse: collapse; width: 100%; margin: 1rem 0; font-size: .9375rem;
  font-variant-numeric: tabular-nums }
caption { text-align: left; padding-bottom: .4rem }
th, td { text-align: left; vertical-align: top; padding: .35rem .9rem .35rem 0;
  border-bottom: 1px solid #dfe5ea }
thead th { font-weight: 600; border-bottom-color: #8794a0; vertical-align: bottom }
tbody th { font-weight: 600; overflow-wrap: anywhere; width: 27% }
figure { margin: 1.2rem 0; min-width: 0 } figcaption { max-width: 52rem }
.plot { width: 100% }
.pair { display: grid; gap: 0 1.5rem;
  grid-template-columns: repeat(auto-fit, minmax(min(100%, 26rem), 1fr)) }
.failed { border-left: .4rem double #a8541a; padding-left: .7rem }
details { margin: .8rem 0 } summary { cursor: pointer; padding: .3rem 0; color: #0b5c8a }
pre { background: #f1f5f8; border: 1px solid #dfe5ea; padding: .8rem; overflow-x: auto;
  font: .875rem/1.45 ui-monospace, monospace; max-width: 60rem }
button { font: inherit; padding: .3rem .9rem; border: 1px solid #0b5c8a; border-radius: 3px;
  background: #fff; color: #0b5c8a; cursor: pointer }
code { font: .875rem ui-monospace, monospace; overflow-wrap: anywhere }
@media screen and (max-width: 46rem) {
  body { padding: 1rem 1rem 3rem }
  dl div { display: block; padding: .3rem 0 }
  dl.key { gap: .8rem }
  table, caption, tbody, tr, tbody th, td { display: block; width: auto }
  thead { position: absolute; width: 1px; height: 1px; overflow: hidden; clip-path: inset(50%) }
  tr { border-bottom: 1px solid #8794a0; padding: .5rem 0 }
  th, td { border: 0; padding: .1rem 0 }
  td { display: grid; grid-template-columns: 9rem 1fr; gap: .6rem }
  td::before { content: attr(data-column); color: #44525f; font-size: .875rem }
}
@page { size: A4; margin: 15mm }
@media print {
  html { font-size: 10pt } body { font-size: 1rem; max-width: none; padding: 0 }
  table { font-size: .875rem } .note { font-size: .8125rem } nav, button { display: none }
  a { color: inherit; text-decoration: none }
  section { margin-top: 1.2rem; padding-top: .8rem }
  h2, h3, caption { break-after: avoid } caption { break-inside: avoid }
  #rung, #late { break-before: page } #configuration { break-inside: avoid }
  figure, tr, pre, dl.key, .verdict, .caution, li { break-inside: avoid }
  thead { display: table-header-group; break-after: avoid }
  tbody tr:first-child { break-before: avoid } th, td { padding-right: .6rem }
  .pair { grid-template-columns: 1fr 1fr }
  dl div { grid-template-columns: 9rem 1fr }
  pre { white-space: pre-wrap }
  .verdict, pre, .caution { print-color-adjust: exact; -webkit-print-color-adjust: exact }
}
"""
