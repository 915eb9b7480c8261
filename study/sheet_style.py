"""The look of the sheet on screen, on a narrow screen and in grey print; the script that draws charts."""

STYLE = """
:root{--ink:#1c2126;--soft:#565e66;--line:#c9ced2;--pale:#f3f5f6;--blue:#0072B2;--red:#b34e00;color-scheme:light}
*{box-sizing:border-box}
html{-webkit-text-size-adjust:100%}
body{margin:0;background:#fff;color:var(--ink);font:15px/1.45 system-ui,-apple-system,"Segoe UI",Roboto,
 Arial,sans-serif}
.rule{height:14px;border-bottom:1.5px solid var(--ink);background:
 repeating-linear-gradient(90deg,var(--ink) 0 1px,transparent 1px 40px) 0 100%/100% 11px no-repeat,
 repeating-linear-gradient(90deg,var(--soft) 0 1px,transparent 1px 8px) 0 100%/100% 5px no-repeat}
header,main,footer{max-width:1180px;margin:0 auto;padding:0 28px}
.skip{position:absolute;left:-999px;top:0;background:var(--ink);padding:.5em 1em;z-index:9}
.skip:focus-within{left:0}.skip a{color:#fff;margin-right:1.2em}
h1{font-size:27px;line-height:1.2;margin:0;letter-spacing:-.01em;overflow-wrap:anywhere}
h2{font-size:20px;margin:0 0 10px;padding-top:26px;position:relative}
h2::before{content:"";position:absolute;top:12px;left:0;width:64px;height:6px;background:
 repeating-linear-gradient(90deg,var(--ink) 0 1.5px,transparent 1.5px 8px)}
h3{font-size:16.5px;margin:0}
.alone{margin-top:24px;font-size:22px}
p{margin:.5em 0;max-width:76ch}
a{color:var(--blue)}
code{font:12px/1.3 ui-monospace,Consolas,"Liberation Mono",monospace;color:var(--soft)}
.kicker{margin:18px 0 2px;color:var(--soft);font-size:13px}
.soft{color:var(--soft)}.small{font-size:13px}
.pairs{display:grid;grid-template-columns:repeat(auto-fill,minmax(190px,1fr));margin:12px 0;
 border-top:1px solid var(--line);
 border-left:1px solid var(--line)}
.pairs div{padding:5px 10px 6px;border-right:1px solid var(--line);border-bottom:1px solid var(--line);
 min-width:0}
dt{font-size:12px;color:var(--soft)}dd{margin:0;overflow-wrap:anywhere}
.banner{border:1.5px solid var(--red);border-left-width:8px;padding:8px 14px;max-width:none}
table{border-collapse:collapse;font-size:13.5px;font-variant-numeric:tabular-nums;min-width:100%}
caption span{display:block;max-width:min(100ch,calc(100vw - 40px))}
caption{text-align:left;color:var(--soft);font-size:13px;padding:4px 0}
th,td{text-align:left;vertical-align:top;padding:4px 12px 4px 0;border-bottom:1px solid var(--line);
 font-weight:400}
thead th{color:var(--soft);font-size:12.5px;border-bottom:1.5px solid var(--ink);vertical-align:bottom}
.n{text-align:right;white-space:nowrap}
.scroll{overflow-x:auto;max-width:100%}
.scroll:focus-visible,summary:focus-visible,select:focus-visible,
 a:focus-visible{outline:2px solid var(--blue);outline-offset:2px}
.hold{table-layout:fixed;width:100%;font-size:14px}
.hold caption{font-size:13.5px}
.hold th,.hold td{padding:8px 14px 9px 0}
.hold tbody th{font-weight:650}
.hold col.m{width:22%}.hold col.g{width:15%}
.hold .limits{display:block;font-weight:400;color:var(--soft);font-size:12.5px}
.src{display:block;font-weight:600;line-height:1.25}
.bar{display:flex;align-items:center;gap:7px;margin:3px 0 1px;font-variant-numeric:tabular-nums}
.bar i{display:block;height:8px;background:var(--blue);min-width:2px;print-color-adjust:exact;
 -webkit-print-color-adjust:exact}
.bar.second i{background:#fff;border:1.5px solid var(--blue)}
.fx{display:block;font-size:12.5px;color:var(--ink)}
.tie{color:var(--soft);white-space:nowrap;margin-left:.5em}.fx .tie:first-child{margin-left:0}
.tag{display:inline-block;font-size:12px;line-height:1.35;padding:0 6px;border:1.2px solid currentColor;
 border-radius:2px;white-space:nowrap}
.tag.hold-v{background:var(--ink);color:#fff;border-color:var(--ink)}
.tag.open-v{color:#00694d;border-style:dashed}.tag.watch-v{color:var(--red)}
.miss{color:var(--red);font-weight:600}
figure{margin:8px 0;min-width:0}
figcaption{font-size:13px;color:var(--soft);margin-bottom:4px}
figcaption b{color:var(--ink)}
.chart,.chart.vega-embed{display:block;width:100%;padding:0;min-height:40px}
.drawing .chart{width:max-content}
.chart svg{display:block}
.fit .chart svg{max-width:100%}
.views{display:grid;grid-template-columns:repeat(2,minmax(0,1fr));gap:4px 24px}
.views figure:first-child{grid-column:1/-1}
.measure{border-top:1px solid var(--line);padding:16px 0 10px}
.measure .two{display:grid;grid-template-columns:minmax(0,1.35fr) minmax(0,1fr);gap:6px 34px;
 align-items:start}
.three{display:grid;grid-template-columns:repeat(auto-fit,minmax(290px,1fr));gap:10px 28px}
details{margin:4px 0 8px;font-size:13.5px}
summary{cursor:pointer;color:var(--blue);font-size:13px;width:max-content;max-width:100%}
select{font:inherit;padding:3px 6px;max-width:100%}
label{font-weight:600}
pre{background:var(--pale);padding:10px 12px;overflow-x:auto;font:12.5px/1.45 ui-monospace,Consolas,
 "Liberation Mono",monospace}
ul{padding-left:1.2em;max-width:84ch}li{margin:.25em 0}
.cautions{border:1.5px solid var(--ink);padding:2px 18px 8px;margin:10px 0}
footer{color:var(--soft);font-size:12.5px;padding-top:16px;padding-bottom:30px}
@media (max-width:900px){.measure .two,.views{grid-template-columns:minmax(0,1fr)}}
@media (max-width:680px){
 header,main,footer{padding:0 14px}h1{font-size:22px}
 .hold,.hold tbody,.hold tr,.hold th,.hold td,.hold caption{display:block;width:100%}
 .hold thead,.hold colgroup{position:absolute;left:-999px;width:1px;overflow:hidden}
 .hold tr{border-bottom:1.5px solid var(--ink);padding:6px 0}
 .hold th,.hold td{border:0;padding:4px 0}
 .pairs{grid-template-columns:repeat(2,minmax(0,1fr))}
}
@media print{
 @page{size:A4;margin:13mm}
 body{font-size:10.5pt}header,main,footer{max-width:none;padding:0}
 .skip,.no-print{display:none}.chart,.bar,.tag,.rule{filter:grayscale(1)}
 .rule,.tag.hold-v{print-color-adjust:exact;-webkit-print-color-adjust:exact}
 a{color:inherit;text-decoration:none}summary{color:var(--soft)}details:not([open]){display:none}
 .scroll{overflow:visible}.drawing .chart{width:100%}
 .chart svg{max-width:100%;height:auto}
 .views{grid-template-columns:minmax(0,1fr)}.three{grid-template-columns:repeat(2,minmax(0,1fr))}
 .measure .two{grid-template-columns:minmax(0,1.4fr) minmax(0,1fr);gap:4px 18px}.measure{padding:8px 0 4px}
 .measure,figure,tr,.cautions,.pairs div{break-inside:avoid}h2,h3,caption,thead{break-after:avoid}
 table{font-size:8.5pt}.hold{font-size:9pt}th,td{padding-right:7px}
}
"""

SCRIPT = """
(async function () {
  const given = JSON.parse(document.getElementById("charts").textContent);
  const root = document.documentElement, choosers = [], fitted = [];
  for (const item of given.charts) {
    const box = document.getElementById(item.id);
    try {
      const drawn = await vegaEmbed(box, item.spec, {
        mode: "vega-lite", renderer: "svg", actions: false, config: given.config, logLevel: 1});
      if (item.choose) choosers.push(drawn.view);
      if (item.paper) fitted.push([drawn.view, item.paper]);
      box.dataset.drawn = "yes";
      if (item.fromEnd) box.parentNode.scrollLeft = box.parentNode.scrollWidth;
    } catch (error) {
      box.textContent = "This chart could not be drawn; its numbers stand in the table with it.";
      console.error(item.id, error);
    }
    await new Promise(done => setTimeout(done));
  }
  const choice = document.getElementById("shown");
  if (choice) choice.addEventListener("change", () => {
    for (const view of choosers) view.signal("shown", Number(choice.value)).runAsync();
  });
  addEventListener("beforeprint", () => { for (const [view, width] of fitted) view.width(width).run(); });
  addEventListener("afterprint", () => dispatchEvent(new Event("resize")));
  root.dataset.charts = "drawn";
})();
"""
