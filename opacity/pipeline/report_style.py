"""How a report looks: on screens wide and narrow, light and dark, and on paper."""

from __future__ import annotations

from opacity.tables.svg import STYLE as PICTURES

STYLE = (
    PICTURES
    + """
:root{--paper:#fdfdfb;--ink:#1b1d21;--soft:#595e66;--rule:#d5d7da;--box:#f2f3f1;
--good:#00664b;--bad:#a33a00;--open:#6b4d8a}
@media screen and (prefers-color-scheme:dark){:root{--paper:#15171a;--ink:#e9e9e6;--soft:#a6abb3;--rule:#3a3e45;
--box:#1f2226;--good:#5fd3ae;--bad:#ff9a66;--open:#c8aee6}}
*{box-sizing:border-box}
html{color-scheme:light dark;-webkit-text-size-adjust:100%}
body{margin:0 auto;padding:1.5rem 1.2rem 4rem;max-width:60rem;background:var(--paper);color:var(--ink);
font:16px/1.5 system-ui,sans-serif;overflow-wrap:anywhere}
h1{font-size:1.75rem;line-height:1.2;margin:.2rem 0 .4rem}
h2{font-size:1.25rem;margin:2.4rem 0 .6rem;padding-top:.6rem;border-top:1px solid var(--rule)}
h3{font-size:1.02rem;margin:1.4rem 0 .4rem}
p{margin:.5rem 0}
.soft,figcaption,caption{color:var(--soft);font-size:.9rem}
.verdict{font-size:1.15rem;font-weight:600;border-left:.35rem solid;
padding:.5rem .8rem;background:var(--box);margin:1rem 0}
.agrees{color:var(--good)}.differs{color:var(--bad)}.cannot-judge{color:var(--open)}
.word{white-space:nowrap;font-weight:600}
.mark{width:1.1em;height:1.1em;vertical-align:-.18em;margin-right:.4em;fill:none;stroke:currentColor;stroke-width:2}
table{border-collapse:collapse;width:100%;font-size:.93rem;margin:.5rem 0}
caption{text-align:left}
th,td{text-align:left;vertical-align:top;padding:.4rem .7rem .4rem 0;border-bottom:1px solid var(--rule)}
th{font-weight:600}
th[scope=row]{min-width:9rem}
.unit{white-space:nowrap}
.number{text-align:right;white-space:nowrap;font-variant-numeric:tabular-nums}
.facts{display:grid;grid-template-columns:minmax(7rem,max-content) 1fr;
gap:.25rem 1.2rem;margin:.5rem 0;font-size:.95rem}
.facts dt{color:var(--soft)}.facts dd{margin:0}
figure{margin:1.2rem 0}
figcaption{margin-top:.3rem}
.picture{overflow-x:auto}
pre{background:var(--box);padding:.8rem 1rem;font:.82rem/1.45 ui-monospace,monospace;white-space:pre-wrap;
margin:.5rem 0}
article+article{margin-top:4rem;padding-top:1.5rem;border-top:.3rem double var(--rule)}
a{color:inherit}
li{margin:.25rem 0}
@media screen and (max-width:40rem){
body{padding:1rem .9rem 3rem}
.facts{grid-template-columns:1fr;gap:0}.facts dd{margin:0 0 .5rem}
.stack thead{position:absolute;width:1px;height:1px;overflow:hidden;clip-path:inset(50%)}
.stack tr{display:block;border-bottom:1px solid var(--rule);padding:.5rem 0}
.stack td,.stack th{display:block;border:0;padding:.1rem 0}
.stack .number{text-align:left}
.stack td[data-label]:not(:empty)::before{content:attr(data-label)": ";color:var(--soft)}}
@media print{:root{--paper:#fff;--ink:#000;--soft:#444;--box:#fff}
html{color-scheme:light}
body{max-width:none;padding:0;font-size:10.5pt}
figure,tr,.verdict{break-inside:avoid}article+article{break-before:page}h2,h3{break-after:avoid}
.picture{overflow:visible}svg[role=img]{min-width:0}
pre{border:1px solid var(--rule)}
*{-webkit-print-color-adjust:exact;print-color-adjust:exact}}
"""
)
