"""Looks of the report page: calm on a screen, the same on paper."""

STYLE = """
:root { --ink: #1c2b33; --soft: #5d6d75; --rule: #d3dadd; --paper: #ffffff; --wash: #f6f8f9;
  --good: #2f7d43; --bad: #b3261e; --warn: #f5c518; }
* { box-sizing: border-box; }
html { background: var(--wash); }
body { margin: 0 auto; padding: 36px 40px 48px; width: 960px; background: var(--paper);
  color: var(--ink); font: 15px/1.5 system-ui, 'Segoe UI', Roboto, 'Helvetica Neue', Arial,
  'DejaVu Sans', sans-serif; font-variant-numeric: tabular-nums; }
header .what { color: var(--soft); font-size: 14px; margin: 0 0 14px; }
h1 { font-size: 26px; line-height: 1.25; font-weight: 650; margin: 0 0 2px;
  letter-spacing: -0.01em; }
h2 { font-size: 17px; font-weight: 650; margin: 40px 0 10px; }
.verdict { display: flex; gap: 22px; align-items: flex-start; border-left: 8px solid var(--good);
  background: #f1f7f2; padding: 18px 22px; margin: 0 0 8px; }
.verdict.fail { border-color: var(--bad); background: #fbf1f0; }
.verdict .word { font-size: 22px; font-weight: 700; color: var(--good); white-space: nowrap;
  line-height: 1.3; }
.verdict.fail .word { color: var(--bad); }
.verdict ul { margin: 0; padding: 3px 0 0; list-style: none; }
.verdict li { margin: 0 0 3px; }
table { border-collapse: collapse; width: 100%; font-size: 14px; }
th, td { text-align: left; padding: 6px 10px 6px 0; border-bottom: 1px solid var(--rule);
  vertical-align: top; }
thead th { color: var(--soft); font-weight: 500; font-size: 13px; }
tbody th { font-weight: 400; }
td.number, th.number { text-align: right; white-space: nowrap; padding-right: 22px; }
td.key { color: var(--soft); font: 12px/1.7 ui-monospace, 'SF Mono', Menlo, Consolas,
  'DejaVu Sans Mono', monospace; }
.met { color: var(--good); font-weight: 600; }
.missed { color: var(--bad); font-weight: 600; }
.use { width: 150px; }
.use svg { display: block; margin-top: 6px; }
.groups { columns: 2; column-gap: 44px; }
.groups section { break-inside: avoid; margin: 0 0 18px; }
.groups h3, .facts h3 { font-size: 13px; font-weight: 600; color: var(--soft); margin: 0 0 2px; }
.groups td, .groups th { padding: 4px 0; font-size: 13.5px; }
.groups td.number { padding-right: 0; }
figure { margin: 0; overflow-x: auto; }
figcaption { color: var(--soft); font-size: 13px; max-width: 74ch; margin-top: 4px; }
svg.figure { display: block; }
.facts { columns: 2; column-gap: 44px; }
.facts section { break-inside: avoid; }
.facts table { font-size: 13.5px; }
.facts th { color: var(--soft); width: 46%; }
.facts td, .facts th { padding: 4px 8px 4px 0; }
.caution { border: 1.5px solid var(--ink); padding: 12px 16px; margin-top: 40px; font-size: 14px; }
.caution b { letter-spacing: 0.02em; }
footer { color: var(--soft); font-size: 12.5px; margin-top: 18px; }
@media screen and (max-width: 1000px) {
  body { width: auto; padding: 20px; }
  .groups, .facts { columns: 1; }
}
@page { size: A4; margin: 12mm; }
@media print {
  html, body { background: none; }
  body { width: 960px; padding: 0; zoom: 0.73; }
  h2 { break-after: avoid; }
  figure, table, .verdict, .caution { break-inside: avoid; }
  * { -webkit-print-color-adjust: exact; print-color-adjust: exact; }
}
"""
