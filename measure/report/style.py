"""The look of the report: two A4 sheets, dark ink on white, nothing told by colour alone."""

CSS = """
@page { size: A4; margin: 9mm 12mm; }
* { box-sizing: border-box; }
body { font: 8pt/1.24 "DejaVu Sans", Verdana, sans-serif; color: #16212b; background: #fff;
  max-width: 186mm; margin: 6mm auto; }
h1 { font-size: 12pt; margin: 0 0 1mm; }
h2 { font-size: 9.4pt; margin: 1.8mm 0 0.6mm; padding: 0.3mm 2mm; background: #e9eef0;
  border-left: 1.6mm solid #34505c; break-after: avoid; }
p, ul { margin: 0 0 0.6mm; } ul { padding-left: 4.5mm; } li.look { font-weight: bold; }
.notice { border: 0.5mm solid #16212b; padding: 0.7mm 2mm; margin: 1mm 0; font-weight: bold; }
.headline p { font-size: 9.6pt; } .headline p:first-child { font-size: 13pt; font-weight: bold; }
table { border-collapse: collapse; width: 100%; margin: 0 0 1mm; }
th { text-align: left; font-weight: normal; color: #46545d; border-bottom: 0.3mm solid #46545d; }
td, th { padding: 0.15mm 2.5mm 0.15mm 0; vertical-align: top; }
tr { break-inside: avoid; } tbody tr:nth-child(even) td { background: #f5f7f7; }
td.number, td.plain { white-space: nowrap; } td.number { font-weight: bold; }
td.small, .small { font-size: 7pt; }
.waves td { font-size: 6.8pt; padding-top: 0; padding-bottom: 0; }
.off { font-weight: bold; text-decoration: underline; }
.result { white-space: nowrap; } .met { font-weight: bold; } .undecided { font-style: italic; }
.columns { columns: 2; column-gap: 5mm; }
.finding { break-inside: avoid; margin: 0 0 1.2mm; } .finding h3 { font-size: 8pt; margin: 0; }
.finding .source { color: #46545d; font-size: 7pt; font-weight: normal; }
.finding p { font-size: 7pt; margin: 0 0 0 3mm; text-indent: -3mm; }
figure { margin: 0.6mm 0; break-inside: avoid; } figcaption { font-size: 7.2pt; color: #303d46; }
figure img { width: 100%; border: 0.2mm solid #8b979e; }
svg { display: block; max-width: 100%; height: auto; }
footer { border-top: 0.3mm solid #46545d; margin-top: 2mm; padding-top: 0.6mm; font-size: 7pt;
  overflow-wrap: anywhere; }
@media screen { body { padding: 0 3mm; font-size: 10pt; max-width: 240mm; }
  .finding p, .small, td.small, .waves td, figcaption, footer { font-size: 9pt; } }
@media print { body { margin: 0; max-width: none; }
  figure.overlay { float: right; width: 68mm; margin: 0 0 1mm 3mm; }
  .beside table { width: auto; } .beside td, .beside th { padding-right: 1.6mm; }
  figure.overlay img { max-height: 52mm; object-fit: contain; } }
h2 { overflow: hidden; } /* beside the overlay, not under it */
.clear { clear: both; }
"""
