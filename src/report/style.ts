/**
 * The looks of a report. Colours differ in lightness as well as in hue, and every colour stands beside a letter, a name or
 * a dash pattern of its own, so that it reads in grey and for colour-blind eyes.
 */
export const style = `
:root{--ink:#17222b;--soft:#5a6772;--line:#d5d9d4;--paper:#fcfbf7;--wash:#f1f1ea;--accent:#14505c;
--zone-a:#e4eee9;--zone-b:#b5cfc9;--zone-c:#e3a63f;--zone-d:#8c2a1c;color-scheme:light}
*{box-sizing:border-box}
html{scroll-padding-top:3.2rem}
body{margin:0;background:var(--paper);color:var(--ink);font:15px/1.5 system-ui,"Segoe UI","DejaVu Sans",sans-serif}
main,header,footer{max-width:1120px;margin:0 auto;padding:0 1.25rem}
header{padding-top:1.6rem}
h1{font-size:1.7rem;line-height:1.2;margin:0;letter-spacing:-.01em}
h2{font-size:1.2rem;margin:2.4rem 0 .7rem;padding-top:.7rem;border-top:2px solid var(--ink)}
h3{font-size:.98rem;margin:1.3rem 0 .4rem}
h4{font-size:.98rem;margin:0 0 .3rem}
small,.note,figcaption span{color:var(--soft);font-weight:400}
small{font-size:.8em}
.note{font-size:.86rem;margin:.3rem 0}
.lead{margin:.3rem 0 0;color:var(--soft)}
.caution{border-left:5px solid var(--zone-c);background:var(--wash);padding:.55rem .9rem;margin:1rem 0 0}
nav{position:sticky;top:0;z-index:20;background:var(--paper);border-bottom:1px solid var(--line);margin-top:1rem}
nav div{max-width:1120px;margin:0 auto;padding:.4rem 1.25rem;display:flex;gap:.3rem 1.1rem;overflow-x:auto;white-space:nowrap}
a{color:var(--accent)}
nav a{text-decoration:none;font-size:.9rem;padding:.2rem 0}
nav a:hover{text-decoration:underline}
.cards{display:grid;grid-template-columns:repeat(auto-fit,minmax(220px,1fr));gap:.8rem;margin-top:1.1rem}
.card{display:grid;grid-template-columns:auto 1fr;gap:0 .8rem;align-items:center;padding:.7rem .8rem;border:1px solid var(--line);border-radius:4px;background:#fff;color:inherit;text-decoration:none}
.card.accused{box-shadow:inset 0 -4px 0 var(--zone-d)}.accused .card-note{font-weight:600}
.card:hover{border-color:var(--accent)}
.card-name{font-size:.85rem;color:var(--soft)}
.card-figure{font-size:1.25rem;font-variant-numeric:tabular-nums}
.card-note{grid-column:2;font-size:.85rem}
.zone{grid-row:1/4;width:2.6rem;height:2.6rem;display:grid;place-items:center;font-size:1.4rem;font-weight:700;border-radius:50%;border:2px solid var(--ink)}
.zone-A{background:var(--zone-a)}.zone-B{background:var(--zone-b)}.zone-C{background:var(--zone-c)}
.zone-D{background:var(--zone-d);color:#fff}.zone-none{background:#fff;border-style:dashed;border-color:var(--soft)}
.finding{border:1px solid var(--line);border-left:5px solid var(--soft);background:#fff;padding:.7rem 1rem;margin:.5rem 0;break-inside:avoid}
.finding.likely{border-left-color:var(--zone-d)}
.finding ul{margin:.2rem 0 .4rem;padding-left:1.2rem}
.finding p{margin:0}
.likelihood{font-size:.78rem;font-weight:600;padding:.1rem .45rem;border:1px solid currentColor;border-radius:3px;margin-right:.3rem}
.facts{display:grid;grid-template-columns:max-content 1fr;gap:.15rem 1.2rem;margin:0 0 1rem}
.facts dt{color:var(--soft)}.facts dd{margin:0;overflow-wrap:anywhere}
.scroll{overflow-x:auto}
table{border-collapse:collapse;font-size:.88rem;width:100%}
th,td{text-align:left;vertical-align:top;padding:.28rem .8rem .28rem 0;border-bottom:1px solid var(--line)}
thead th{color:var(--soft);font-weight:500;border-bottom-color:var(--ink);white-space:nowrap}
tbody th{font-weight:600}
tr.shown td{background:var(--wash);font-weight:600}
.number{font-variant-numeric:tabular-nums;white-space:nowrap}
.levels-grid{display:grid;grid-template-columns:repeat(auto-fit,minmax(310px,1fr));gap:.4rem 2rem}
.bands .bar{width:36%;min-width:70px;vertical-align:middle;padding-right:0}.bands th small{display:block;white-space:nowrap}
.bar svg{display:block;width:100%;height:9px;background:var(--wash)}.bar rect{fill:var(--accent)}
.zonebar{position:relative;height:26px;margin:.5rem 0 1.4rem;border:1px solid var(--ink)}
.zonebar i{position:absolute;top:0;bottom:0;display:grid;place-items:center;font-style:normal;font-weight:600;font-size:.8rem}
.zonebar i+i{border-left:1px solid var(--ink)}
.zonebar .limit{position:absolute;top:100%;transform:translateX(-50%);font-size:.75rem;color:var(--soft)}
.zonebar b{position:absolute;top:-6px;bottom:-6px;width:5px;margin-left:-2.5px;background:var(--ink);border:1px solid #fff}
.figures{display:grid;grid-template-columns:repeat(auto-fill,minmax(235px,1fr));gap:0 1.6rem;margin:0;font-size:.88rem}
.figures div{display:flex;justify-content:space-between;gap:.8rem;border-bottom:1px solid var(--line);padding:.2rem 0}
.figures dt{color:var(--soft)}.figures dd{margin:0;font-variant-numeric:tabular-nums}
details{margin:1rem 0}summary{cursor:pointer;font-weight:600;font-size:.95rem}
.chart{margin:1.3rem 0 0;break-inside:avoid}
.chart:not([data-filled]){min-height:360px}
figcaption{font-size:.9rem;margin-bottom:.3rem}
.tools{display:flex;flex-wrap:wrap;gap:.3rem .5rem;align-items:center;font-size:.85rem;margin-bottom:.25rem}
.tools button{font:inherit;min-width:2.1rem;min-height:2rem;padding:.1rem .55rem;border:1px solid var(--soft);background:#fff;color:var(--ink);border-radius:3px;cursor:pointer}
.tools button:hover{border-color:var(--ink)}
.tools button[aria-pressed=false]{color:var(--soft)}
.tools button[aria-pressed=true]{background:var(--zone-a);border-color:var(--ink)}
.tools button[aria-pressed=true]::after{content:" ✓"}
.tools button .key{display:inline-block;width:1.6em;height:0;border-top:2.5px solid;vertical-align:middle;margin-right:.4em}
.tools .apart{margin-left:.6rem}
.readout{min-height:1.5em;font-size:.86rem;font-variant-numeric:tabular-nums}
.readout b{font-weight:600}
.plot{position:relative;background:#fff;border:1px solid var(--line);min-height:230px}
.plot:focus-visible{outline:3px solid var(--accent);outline-offset:1px}
.plot .u-over{cursor:crosshair}
.plot .pin{position:absolute;top:0;bottom:0;width:0;border-left:1.5px solid var(--ink);pointer-events:none}
.plot .pin.harmonic{border-left:1px dotted var(--ink)}
.plot .pin em{position:absolute;bottom:3px;left:3px;font:600 11px/1 system-ui,sans-serif;background:#ffffffd9;padding:1px 2px}
.plot .dot{position:absolute;width:9px;height:9px;margin:-4.5px;border:2px solid var(--ink);border-radius:50%;background:#fff;pointer-events:none}
.u-select{background:#14505c26}
footer{padding:2rem 1.25rem 3rem;color:var(--soft);font-size:.86rem}
@media (max-width:640px){body{font-size:14.5px}main,header,nav div,footer{padding-left:.8rem;padding-right:.8rem}h1{font-size:1.35rem}
.facts{grid-template-columns:1fr}.facts dd{margin-bottom:.4rem}.tools .apart{margin-left:0}
.stacks thead{display:none}.stacks tr{display:block;border-bottom:1px solid var(--ink);padding:.4rem 0}
.stacks td,.stacks th{display:grid;grid-template-columns:5.5rem 1fr;border:0;padding:.1rem 0;overflow-wrap:anywhere}
.stacks th{display:block}.stacks td::before{content:attr(data-label);color:var(--soft)}}
@media print{nav,.tools,.readout:empty{display:none}body{background:#fff;font-size:10.5pt}main,header,footer{max-width:none;padding:0}
.plot{border-color:#888}details>*{display:block}.card,.levels,.finding{break-inside:avoid}h2,h3{break-after:avoid}
*{-webkit-print-color-adjust:exact;print-color-adjust:exact}}
`;
