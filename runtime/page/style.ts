/**
 * The page's only style sheet. Few colours, by the system's light or dark: ink for what was read, one blue-green for what is
 * forecast, ochre for limits and what needs a look, brick for failure. Text stands out from its ground by 4.5 to 1 or more
 * (WCAG 2.2, 1.4.3).
 */
export const STYLE = `
:root {
  --ground: #f4f5f2; --paper: #ffffff; --ink: #1b2427; --soft: #566267; --line: #dde1dd; --strong: #b9c1be;
  --ahead: #17687f; --band: rgb(23 104 127 / .17); --said: rgb(23 104 127 / .09); --said-line: #6f9aa8; --tint: #f3f7f7;
  --look: #855000; --look-ground: #fbf0dc; --fail: #a52a21; --fail-ground: #fbe9e6;
}
@media (prefers-color-scheme: dark) {
  :root {
    --ground: #12171a; --paper: #1a2125; --ink: #e4eaea; --soft: #9fadb1; --line: #2c363b; --strong: #4a585e;
    --ahead: #6cc0d6; --band: rgb(108 192 214 / .2); --said: rgb(108 192 214 / .1); --said-line: #4f8795; --tint: #1f282c;
    --look: #e9b35c; --look-ground: #35290f; --fail: #ff998c; --fail-ground: #3d1c19;
  }
}
* { box-sizing: border-box; }
html { -webkit-text-size-adjust: 100%; scroll-padding-top: 1rem; }
body { margin: 0; background: var(--ground); color: var(--ink); font: 15px/1.45 system-ui, -apple-system, "Segoe UI", Roboto, sans-serif;
  font-variant-numeric: tabular-nums; overflow-wrap: break-word; }
#page, footer, .plain { max-width: 1320px; margin: 0 auto; padding: 0 20px; }
h1, h2, h3, p, ul, dl, dd, table { margin: 0; padding: 0; }
ul { list-style: none; }
h1 { font-size: 1.5rem; line-height: 1.2; font-weight: 650; letter-spacing: -.01em; }
h2 { font-size: 1rem; font-weight: 650; }
h3 { font-size: 1rem; font-weight: 650; line-height: 1.3; }
a { color: inherit; text-underline-offset: 2px; }
:focus-visible { outline: 2px solid var(--ahead); outline-offset: 2px; border-radius: 4px; }
.unseen { position: absolute; width: 1px; height: 1px; overflow: hidden; clip-path: inset(50%); white-space: nowrap; }
[hidden] { display: none !important; }

.top { display: flex; flex-wrap: wrap; gap: 4px 24px; align-items: flex-end; justify-content: space-between; padding: 22px 0 14px; }
.where, .heard { color: var(--soft); font-size: .87rem; }
.state { text-align: right; }
.status { font-weight: 600; min-height: 1.45em; }
.status.F { color: var(--fail); }
.status.C, .status.S, .status.M { color: var(--look); }
.heard::before { content: ""; display: inline-block; width: .55em; height: .55em; margin-right: .45em; border-radius: 50%; background: var(--ahead); }
.silent .heard::before { background: none; border: 1.5px solid var(--fail); }
.silent .heard { color: var(--fail); }
.lost { display: flex; flex-wrap: wrap; gap: 10px 16px; align-items: center; padding: 10px 14px; margin-bottom: 14px; border-radius: 8px;
  background: var(--fail-ground); color: var(--fail); font-weight: 600; position: sticky; top: 8px; z-index: 1; }
button { font: inherit; color: inherit; background: none; border: 1.5px solid currentColor; border-radius: 6px; padding: 4px 12px; cursor: pointer; min-height: 32px; }
.silent .signals, .silent aside { opacity: .62; }

main { display: grid; grid-template-columns: minmax(0, 1fr) 300px; gap: 24px; align-items: start; }

.warnings { border: 1px solid var(--look); border-radius: 10px; background: var(--look-ground); color: var(--look); padding: 8px 16px; margin-bottom: 16px; }
.warnings.none { border-color: var(--line); background: none; color: var(--soft); }
.warnings li { padding: 2px 0; }
.warnings a { font-weight: 650; margin-right: .45em; }
.warnings a:empty { display: none; }
.bar { display: flex; flex-wrap: wrap; gap: 4px 20px; align-items: baseline; justify-content: space-between; margin-bottom: 10px; }
.legend { display: flex; flex-wrap: wrap; gap: 2px 16px; color: var(--soft); font-size: .82rem; }
.legend li { display: flex; gap: 6px; align-items: center; }

.overview { margin-bottom: 14px; }
.overview summary { color: var(--soft); font-size: .87rem; min-height: 28px; cursor: pointer; width: fit-content; }
.overview ul { display: flex; flex-wrap: wrap; gap: 6px; }
.overview a { display: flex; gap: 7px; align-items: baseline; min-height: 28px; padding: 3px 10px; border: 1px solid var(--line); border-radius: 7px;
  background: var(--paper); text-decoration: none; font-size: .87rem; }
.overview a:hover { border-color: var(--strong); }
.overview a.look { border-color: var(--look); color: var(--look); background: var(--look-ground); }
.overview .mark { font-weight: 650; }
.overview .mark:empty { display: none; }
.filter { display: inline-flex; gap: 8px; align-items: center; margin-top: 8px; color: var(--soft); font-size: .87rem; min-height: 28px; cursor: pointer; }
.filter input { accent-color: var(--ahead); width: 16px; height: 16px; margin: 0; }

.cards { display: grid; grid-template-columns: repeat(auto-fill, minmax(min(100%, 390px), 1fr)); gap: 14px; }
.cards.of-1 { grid-template-columns: minmax(0, 1fr); }
.card { background: var(--paper); border: 1px solid var(--line); border-radius: 10px; padding: 14px 16px 12px; min-width: 0; scroll-margin-top: 14px; }
.card:target { border-color: var(--ahead); }
.card header { display: flex; gap: 12px; justify-content: space-between; align-items: flex-start; min-height: 3.4rem; }
.card .name { min-width: 0; display: flex; flex-wrap: wrap; gap: 3px 8px; align-items: center; padding-top: 4px; }
.card .now { text-align: right; flex: none; }
.value { line-height: 1.15; white-space: nowrap; }
.value b { font-size: 1.65rem; font-weight: 600; letter-spacing: -.01em; }
.unit { color: var(--soft); }
.age { color: var(--soft); font-size: .82rem; display: block; white-space: nowrap; }
.letter { border-radius: 5px; padding: 1px 8px; font-size: .82rem; font-weight: 650; color: var(--look); background: var(--look-ground); white-space: nowrap; }
.letter.F { color: var(--fail); background: var(--fail-ground); }
.reason { color: var(--soft); font-size: .87rem; min-height: 2.9em; }
.untrusted .reason { color: var(--look); }
.leads { border-collapse: collapse; width: 100%; max-width: 480px; margin: 4px 0 8px; font-size: .87rem; position: relative; }
.leads th, .leads td { font-weight: 400; text-align: right; padding: 1px 0 1px 10px; white-space: nowrap; color: var(--soft); }
.leads th { text-align: left; padding-left: 0; width: 30%; }
.leads td.median { font-weight: 650; color: var(--ahead); width: 26%; }
.untrusted .leads td.median { color: var(--soft); font-weight: 400; }
.chart-holder { overflow: hidden; }
.chart { display: block; touch-action: pan-y; cursor: crosshair; }
.readout { min-height: 1.45em; font-size: .82rem; white-space: nowrap; overflow: hidden; text-overflow: ellipsis; }
.card .limits li { font-size: .87rem; padding-left: 14px; position: relative; }
.card .limits li::before { content: ""; position: absolute; left: 0; top: .72em; width: 8px; border-top: 1.5px dashed var(--look); }

.chart path, .key path { fill: none; stroke-linejoin: round; stroke-linecap: round; }
.chart .ahead-ground { fill: var(--tint); }
.grid line { stroke: var(--line); stroke-width: 1; }
.grid .tick { stroke: var(--strong); }
.chart text { fill: var(--soft); font-size: 11px; }
.chart text.day { fill: var(--ink); }
.chart path.readings, .key path.readings { stroke: var(--ink); stroke-width: 1.4; }
.chart path.median, .key path.median { stroke: var(--ahead); stroke-width: 2; }
.chart path.band, .key path.band { fill: var(--band); }
.chart path.said, .key path.said { fill: var(--said); }
.chart path.said-line, .key path.said-line { stroke: var(--said-line); stroke-width: 1.2; stroke-dasharray: 1 4; }
.limits line, .key path.limit { stroke: var(--look); stroke-width: 1.2; stroke-dasharray: 5 4; }
.chart text.limit-name { fill: var(--look); paint-order: stroke; stroke: var(--paper); stroke-width: 3px; stroke-linejoin: round; }
.chart .now { stroke: var(--strong); stroke-width: 1; }
.chart .cursor { stroke: var(--ink); stroke-width: 1; }
.chart .cursor.off { display: none; }
.chart.untrusted path.median { stroke: var(--soft); stroke-dasharray: 6 5; stroke-width: 1.5; }
.chart.untrusted path.band { fill: none; stroke: var(--strong); stroke-width: 1; stroke-dasharray: 2 4; }
.key { flex: none; }

aside { display: grid; gap: 14px; }
.panel { background: var(--paper); border: 1px solid var(--line); border-radius: 10px; padding: 14px 16px; font-size: .87rem; }
.panel h2 { margin-bottom: 8px; }
.panel dl > div { padding: 6px 0; border-top: 1px solid var(--line); }
.panel dt { color: var(--soft); }
.panel dd { overflow-wrap: anywhere; }
.inputs { width: 100%; border-collapse: collapse; }
.inputs th, .inputs td { text-align: left; vertical-align: top; padding: 5px 8px 5px 0; border-top: 1px solid var(--line); font-weight: 400; }
.inputs thead th { border-top: 0; color: var(--soft); padding-top: 0; }
.links { color: var(--soft); padding-top: 8px; border-top: 1px solid var(--line); }

footer { padding-top: 20px; padding-bottom: 28px; color: var(--soft); font-size: .87rem; }
footer p { max-width: 84ch; }

@media (max-width: 960px) { main { grid-template-columns: minmax(0, 1fr); } aside { grid-template-columns: repeat(auto-fit, minmax(min(100%, 300px), 1fr)); align-items: start; } }
@media (max-width: 560px) {
  #page, footer, .plain { padding-left: 12px; padding-right: 12px; }
  .top { padding-top: 14px; }
  .state { text-align: left; width: 100%; }
  .card { padding: 12px 12px 10px; }
}
@media (prefers-reduced-motion: no-preference) { html { scroll-behavior: smooth; } }
@media print { body { background: #fff; } .card { break-inside: avoid; } .filter, .lost { display: none; } }
`;
