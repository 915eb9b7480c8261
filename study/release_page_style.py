"""The look of the release page: one A4 page in print."""

STYLE = """
:root{--ink:#1c2126;--soft:#565e66;--line:#c9ced2;--red:#b34e00;color-scheme:light}
*{box-sizing:border-box}
body{margin:0 auto;max-width:1060px;padding:22px 28px;background:#fff;color:var(--ink);
 font:14px/1.4 system-ui,-apple-system,"Segoe UI",Roboto,Arial,sans-serif}
.top{display:flex;justify-content:space-between;align-items:stretch;gap:20px;border:1.5px solid var(--ink)}
.top>div{padding:6px 12px;min-width:0}
.kicker{margin:0;color:var(--soft);font-size:12.5px}
h1{margin:0;font-size:28px;line-height:1.15;overflow-wrap:anywhere}
.part{margin:0;font-size:16px;overflow-wrap:anywhere}
.issue{border-left:1.5px solid var(--ink);min-width:92px!important;text-align:center;overflow-wrap:anywhere}
.issue span{display:block;color:var(--soft);font-size:12.5px}.issue b{font-size:34px;line-height:1.1}
.pairs{display:grid;grid-template-columns:repeat(4,minmax(0,1fr));margin:0;border-left:1px solid var(--line)}
.pairs .two{grid-column:span 2}
.pairs div{padding:3px 10px 4px;border-right:1px solid var(--line);border-bottom:1px solid var(--line);min-width:0}
dt{font-size:11.5px;color:var(--soft)}dd{margin:0;overflow-wrap:anywhere}
.wide{overflow-x:auto;margin-top:12px}
.wide:focus-visible{outline:2px solid #0072B2}
table{border-collapse:collapse;width:100%;font-variant-numeric:tabular-nums}
th,td{text-align:left;vertical-align:top;padding:5px 10px 5px 0;border-bottom:1px solid var(--line);font-weight:400}
thead th{color:var(--soft);font-size:12px;border-bottom:1.5px solid var(--ink)}
tbody th{font-weight:650;min-width:9.2em}
th small,td small{color:var(--soft);font-size:12px;font-weight:400}
.n{text-align:right;white-space:nowrap;padding-left:4px}
.frames{white-space:nowrap}.frames>div+div{margin-top:3px}.frames small{display:block;white-space:normal}
.frame{display:inline-flex;border:1.2px solid var(--ink);margin-right:7px;vertical-align:middle}
.frame i{font-style:normal;padding:1px 7px;border-left:1.2px solid var(--ink);min-width:22px;text-align:center}
.frame i:first-child{border-left:0;padding:1px 3px}
.frame svg{display:block;width:20px;height:20px}
.why{font-size:12.5px;min-width:230px}.soft{color:var(--soft)}
.tag{display:inline-block;font-size:12px;line-height:1.4;padding:0 7px;border:1.2px solid currentColor;border-radius:2px}
.tag.hold-v{background:var(--ink);color:#fff;border-color:var(--ink)}
.tag.open-v{color:#00694d;border-style:dashed}.tag.watch-v{color:var(--red)}
.below{margin:7px 0 0}
.middle{display:grid;grid-template-columns:minmax(0,9fr) minmax(0,11fr);gap:6px 24px;margin:14px 0 4px;align-items:start}
.middle.alone{grid-template-columns:minmax(0,1fr)}
figure{margin:0;min-width:0}figure img{display:block;width:100%;height:auto;max-height:520px;object-fit:contain;object-position:0 0}
.middle .wide{margin:0}
.influence{font-size:13px}.influence caption{text-align:left;color:var(--soft);font-size:12.5px;padding-bottom:3px}
.influence th,.influence td{padding:2.5px 6px 2.5px 0;vertical-align:middle}.influence tbody th{font-weight:400;min-width:0}
.limits{color:var(--soft)}.influence td.n{padding:2.5px 6px;print-color-adjust:exact;-webkit-print-color-adjust:exact}
main{font-size:12.5px;columns:2;column-gap:26px;margin-top:8px}
h2{font-size:13.5px;margin:0 0 3px;break-after:avoid}
ul,ol{margin:0 0 8px;padding-left:1.5em}li{margin:1px 0;break-inside:avoid}
.warnings{border:1.5px solid var(--red);border-left-width:7px;padding:5px 12px 0;margin-top:10px;font-size:12.5px;break-inside:avoid}
footer{border-top:1.5px solid var(--ink);margin-top:8px;padding-top:4px;color:var(--soft);font-size:11px;overflow-wrap:anywhere}
@media (max-width:760px){body{padding:12px 14px}.pairs{grid-template-columns:repeat(2,minmax(0,1fr))}.middle{grid-template-columns:minmax(0,1fr)}main{columns:1}}
@media print{
 .middle.long{grid-template-columns:minmax(0,1fr)!important}.long figure{display:none}
 @page{size:A4;margin:10mm 11mm}
 body{max-width:none;padding:0;font-size:8.8pt}
 h1{font-size:17pt}.part{font-size:11pt}.issue b{font-size:20pt}.kicker,.issue span,dt{font-size:7.5pt}
 .pairs{grid-template-columns:repeat(4,minmax(0,1fr))}dd{font-size:8.3pt}.pairs div{padding:2px 8px 2px}
 th,td{padding:2.2pt 7pt 2.2pt 0}thead th,.why,th small,td small{font-size:7.6pt}.why{min-width:0;line-height:1.3}
 main{font-size:7.2pt;line-height:1.24}h2{font-size:8.5pt}footer{font-size:6.8pt}
 .middle{grid-template-columns:minmax(0,8fr) minmax(0,11fr);gap:4px 16px;margin:9px 0 2px}main{columns:2;margin-top:5px}
 .middle.alone{grid-template-columns:minmax(0,1fr)}.influence{font-size:7.6pt}figure img{max-height:76mm}.influence caption,.warnings{font-size:7.4pt}
 .wide{overflow:visible}.below{font-size:8pt;margin-top:3pt}tr,figure{break-inside:avoid}
 .tag,figure,.warnings{filter:grayscale(1)}
 .tag.hold-v{print-color-adjust:exact;-webkit-print-color-adjust:exact}
}
"""

SYMBOLS = (
    '<svg width="0" height="0" style="position:absolute" aria-hidden="true"><defs>'
    '<g id="position" fill="none" stroke="currentColor" stroke-width="1.3"><circle cx="10" cy="10" r="4.6"/>'
    '<path d="M2 10H18M10 2V18"/></g>'
    '<g id="angularity" fill="none" stroke="currentColor" stroke-width="1.3"><path d="M16 4.5L3 15.5H17"/></g>'
    "</defs></svg>"
)
