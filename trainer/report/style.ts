/** The report's only style sheet: readable on a screen, on a phone and on paper; nothing is loaded from elsewhere. */
export const style = `
:root { color-scheme: light; }
body { font: 15px/1.5 system-ui, sans-serif; color: #1a1a1a; max-width: 980px; margin: 0 auto; padding: 1.2rem; background: #fff; }
h1 { font-size: 1.6rem; margin: 0 0 .2rem; } h2 { font-size: 1.2rem; margin: 2.2rem 0 .4rem; border-bottom: 1px solid #ccc; padding-bottom: .2rem; }
h3 { font-size: 1rem; margin: 1.4rem 0 .3rem; }
p { margin: .4rem 0; max-width: 72ch; } .meta { color: #555; }
.caution { border-left: 4px solid #d55e00; background: #fff4ec; padding: .6rem .9rem; margin: 1rem 0; max-width: none; }
.verdict { border-left: 4px solid #0072b2; background: #eef6fb; padding: .6rem .9rem; margin: 1rem 0; max-width: none; }
.verdict.bad { border-color: #d55e00; background: #fff4ec; }
.wide { overflow-x: auto; }
table { border-collapse: collapse; margin: .5rem 0; font-size: 14px; }
th, td { text-align: left; padding: .25rem .7rem .25rem 0; border-bottom: 1px solid #e4e4e4; vertical-align: top; }
table.skill td { padding: 1px; } .cell { display: block; padding: .25rem .5rem; min-width: 5.2em; }
.cell small { display: block; color: #333; font-size: 10px; }
.pair { display: grid; grid-template-columns: repeat(auto-fit, minmax(300px, 1fr)); gap: 1rem; }
figure { margin: 0; } figcaption { color: #555; font-size: 13px; } svg { max-width: 100%; height: auto; }
.key { display: inline-block; width: 1.6em; height: .6em; margin: 0 .3em 0 .9em; vertical-align: middle; }
td strong { white-space: nowrap; } table.glance td { padding-right: 1rem; } .mood { display: inline-block; padding: .05rem .5rem; border-radius: .2rem; }
.mood.good { background: rgb(0 158 115 / .25); } .mood.fair { background: rgb(230 159 0 / .25); } .mood.bad { background: rgb(213 94 0 / .3); }
code { font-size: 13px; overflow-wrap: anywhere; }
@media print { body { max-width: none; padding: 0; font-size: 12px; } .wide { overflow: visible; } table { font-size: 11px; } .cell { min-width: 0; padding: .15rem .25rem; }
  th, td { padding-right: .35rem; } * { print-color-adjust: exact; -webkit-print-color-adjust: exact; } h2, h3 { break-after: avoid; } figure, table { break-inside: avoid; } }
`;
