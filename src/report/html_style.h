// The report's style sheet, inside the file so that it opens offline.
#pragma once

namespace coldpin::report {

inline constexpr const char* html_style = R"css(
:root { color-scheme: light dark;
  --paper: #fbfaf7; --ink: #22272b; --soft: #5c6469; --line: #d9d6cd; --panel: #f2f0ea;
  --pass: #1b6e54; --fail: #a3283c; --open: #80600d; --forbidden: #a3283c22;
  --s0: #0f5d7f; --s1: #9a4b12; --s2: #5c4a9c; --s3: #39702a; --s4: #8a2f6b; --s5: #4d5a63; }
@media (prefers-color-scheme: dark) { :root {
  --paper: #171a1c; --ink: #e8e6e1; --soft: #a2a9ad; --line: #373c3f; --panel: #202427;
  --pass: #6fcfaa; --fail: #f28b9b; --open: #e3bd5c; --forbidden: #f28b9b26;
  --s0: #6fc3e8; --s1: #eda36b; --s2: #b3a5f0; --s3: #98d184; --s4: #e79bcb; --s5: #b4c0c8; } }
* { box-sizing: border-box; }
body { margin: 0 auto; max-width: 68rem; padding: 1.5rem clamp(0.8rem, 3vw, 2.5rem) 4rem; background: var(--paper);
  color: var(--ink); font: 16px/1.5 system-ui, "Segoe UI", "DejaVu Sans", sans-serif; overflow-wrap: anywhere; }
h1 { font-size: 1.6rem; line-height: 1.2; margin: 0; }
h2 { font-size: 1.1rem; margin: 2.2rem 0 0.6rem; }
h3 { font-size: 0.95rem; margin: 1.2rem 0 0.3rem; color: var(--soft); font-weight: 600; }
p { margin: 0.4rem 0; } .soft { color: var(--soft); }
header { display: flex; flex-wrap: wrap; gap: 0.5rem 2rem; justify-content: space-between; align-items: start;
  border-bottom: 2px solid var(--ink); padding-bottom: 1rem; }
.verdict { font-weight: 700; white-space: nowrap; }
.verdict.pass { color: var(--pass); } .verdict.fail { color: var(--fail); } .verdict.undecided { color: var(--open); }
.outcome { display: flex; gap: 1rem; align-items: center; margin: 1.2rem 0; padding: 0.9rem 1.1rem; background: var(--panel);
  border-left: 0.5rem solid; }
.outcome.pass { border-color: var(--pass); } .outcome.fail { border-color: var(--fail); }
.outcome.undecided { border-color: var(--open); }
.outcome .verdict { font-size: 1.7rem; text-transform: uppercase; letter-spacing: 0.04em; }
table { border-collapse: collapse; width: 100%; font-variant-numeric: tabular-nums; }
th { text-align: left; font-weight: 600; font-size: 0.82rem; color: var(--soft); }
th, td { padding: 0.35rem 0.8rem 0.35rem 0; border-bottom: 1px solid var(--line); vertical-align: middle; }
td.number { white-space: nowrap; }
tr.why td { border-bottom: 1px solid var(--line); padding-top: 0; color: var(--soft); font-size: 0.88rem; }
tr.has-why td { border-bottom: 0; }
svg.band { width: 9.5rem; height: 1.4rem; display: block; }
.band .room { fill: var(--line); } .band .edge { stroke: var(--ink); stroke-width: 1.5; }
.band .reach { stroke: var(--ink); stroke-width: 2; } .band .mark.pass { fill: var(--pass); }
.band .mark.fail { fill: var(--fail); } .band .mark.undecided { fill: var(--open); }
.charts { display: grid; grid-template-columns: repeat(auto-fit, minmax(min(100%, 27rem), 1fr)); gap: 1.2rem; }
figure.chart { margin: 0; } figcaption { font-weight: 600; font-size: 0.92rem; }
figcaption span { color: var(--soft); font-weight: 400; }
.chart svg { width: 100%; height: auto; display: block; }
.grid { stroke: var(--line); stroke-width: 1; } .grid.thin { opacity: 0.45; }
.tick, .axis { fill: var(--soft); font: 13px system-ui, "DejaVu Sans", sans-serif; }
.curve { fill: none; stroke-width: 2; stroke-linejoin: round; } .spread { opacity: 0.22; stroke: none; }
.forbidden { fill: var(--forbidden); } .limit { fill: none; stroke: var(--fail); stroke-width: 1.2; stroke-dasharray: 5 4; }
.bound { fill: none; stroke-width: 2; } .whisker { stroke-width: 2; }
.curve.s0, .whisker.s0, .bound.s0 { stroke: var(--s0); } .spread.s0, .dot.s0 { fill: var(--s0); }
.curve.s1, .whisker.s1, .bound.s1 { stroke: var(--s1); } .spread.s1, .dot.s1 { fill: var(--s1); }
.curve.s2, .whisker.s2, .bound.s2 { stroke: var(--s2); } .spread.s2, .dot.s2 { fill: var(--s2); }
.curve.s3, .whisker.s3, .bound.s3 { stroke: var(--s3); } .spread.s3, .dot.s3 { fill: var(--s3); }
.curve.s4, .whisker.s4, .bound.s4 { stroke: var(--s4); } .spread.s4, .dot.s4 { fill: var(--s4); }
.curve.s5, .whisker.s5, .bound.s5 { stroke: var(--s5); } .spread.s5, .dot.s5 { fill: var(--s5); }
.curve.s1 { stroke-dasharray: 8 3; } .curve.s2 { stroke-dasharray: 3 3; } .curve.s3 { stroke-dasharray: 10 3 2 3; }
.key { list-style: none; display: flex; flex-wrap: wrap; gap: 0.2rem 1.2rem; margin: 0.2rem 0 0; padding: 0; font-size: 0.85rem; }
.key li::before { content: ""; display: inline-block; width: 1.3rem; border-top: 3px solid; margin-right: 0.45rem; vertical-align: middle; }
.key .s0::before { border-color: var(--s0); } .key .s1::before { border-color: var(--s1); border-top-style: dashed; }
.key .s2::before { border-color: var(--s2); border-top-style: dotted; } .key .s3::before { border-color: var(--s3); border-top-style: dashed; }
.key .s4::before { border-color: var(--s4); } .key .s5::before { border-color: var(--s5); }
dl { display: grid; grid-template-columns: max-content 1fr; gap: 0.15rem 1.2rem; margin: 0; }
dt { color: var(--soft); } dd { margin: 0; }
details { margin-top: 1.2rem; } summary { cursor: pointer; font-weight: 600; }
pre { background: var(--panel); padding: 0.8rem; overflow-x: auto; font-size: 0.82rem; }
ul.plain { padding-left: 1.2rem; margin: 0.4rem 0; }
@media (max-width: 40rem) {
  table.stack thead { display: none; }
  table.stack tr { display: grid; grid-template-columns: 1fr max-content; padding: 0.5rem 0; border-bottom: 1px solid var(--line); }
  table.stack tr.has-why { border-bottom: 0; padding-bottom: 0; }
  table.stack td { border: 0; padding: 0.05rem 0; white-space: normal; }
  table.stack td.name { grid-column: 1; font-weight: 600; } table.stack td.word { grid-column: 2; grid-row: 1; }
  table.stack td.number, table.stack td.picture, table.stack tr.why td { grid-column: 1 / -1; }
  table.stack td.limit::before { content: "limit "; color: var(--soft); }
  table.stack td.margin::before { content: "margin "; color: var(--soft); }
  dl { grid-template-columns: 1fr; } dt { margin-top: 0.4rem; } }
@media print { body { max-width: none; padding: 0; font-size: 11px; } details:not([open]) { display: none; }
  figure.chart, tr { break-inside: avoid; } }
)css";

}  // namespace coldpin::report
