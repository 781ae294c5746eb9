/*
 * Ink on warm paper; green for found, rust for missed, violet for what no drill explains. Each also has its own shape,
 * so that nothing depends on colour alone. All text keeps a contrast of at least 4.5 to 1.
 */
#include "client/report/style.h"

#include <stddef.h>

const char *const report_style[] = {
    ":root{--ink:#1c2b2d;--soft:#51605f;--rule:#d8d3c4;--paper:#fbf9f3;--card:#fffefb;--deep:#14343a;"
    "--found:#0c6b5e;--missed:#a63d12;--event:#5a3a94;--aside:#6d7377;--wash:#dcebe4}\n",
    "*{box-sizing:border-box}html{scroll-behavior:smooth}\n",
    "body{margin:0;background:var(--paper);color:var(--ink);font:16px/1.55 system-ui,'DejaVu Sans',sans-serif}\n",
    "header{background:var(--deep);color:#f3f0e6;padding:44px 0 34px;border-bottom:6px solid #c9973a}\n",
    ".in{max-width:1040px;margin:0 auto;padding:0 30px}\n",
    "header p{margin:4px 0 0;color:#cfdad4}header .kind{text-transform:uppercase;letter-spacing:.14em;"
    "font-size:13px;color:#e3bd73;margin:0 0 8px}\n",
    "h1,h2,h3{font-family:Charter,'Bitstream Charter','DejaVu Serif',Georgia,serif;font-weight:600;"
    "line-height:1.2}\n",
    "h1{font-size:38px;margin:0}h2{font-size:25px;margin:0 0 6px}h3{font-size:18px;margin:28px 0 8px}\n",
    "nav{background:#efeadd;border-bottom:1px solid var(--rule);font-size:14px}\n",
    "nav ol{list-style:none;margin:0;padding:10px 0;display:flex;flex-wrap:wrap;gap:4px 22px}\n",
    "nav a{color:var(--deep);text-decoration:none}nav a:hover{text-decoration:underline}\n",
    "a:focus-visible,summary:focus-visible{outline:3px solid #c9973a;outline-offset:2px}\n",
    "section{padding:38px 0 8px}section>p.lead{color:var(--soft);margin:0 0 18px;max-width:74ch}\n",
    ".keys{display:grid;grid-template-columns:repeat(4,1fr);gap:16px;margin:22px 0 10px}\n",
    ".key{background:var(--card);border:1px solid var(--rule);border-top:4px solid var(--deep);"
    "padding:14px 18px}\n",
    ".key b{display:block;font:600 34px/1.1 Charter,'Bitstream Charter','DejaVu Serif',Georgia,serif;"
    "font-variant-numeric:tabular-nums}\n",
    ".key span{font-size:14px;color:var(--soft)}.key.found{border-top-color:var(--found)}"
    ".key.found b{color:var(--found)}.key.missed{border-top-color:var(--missed)}"
    ".key.missed b{color:var(--missed)}.key.event{border-top-color:var(--event)}"
    ".key.event b{color:var(--event)}\n",
    "dl{display:grid;grid-template-columns:160px 1fr;margin:20px 0 0;border-top:1px solid var(--rule)}\n",
    "dt,dd{margin:0;padding:12px 0;border-bottom:1px solid var(--rule)}\n",
    "dt{font-weight:600;color:var(--deep)}\n",
    "table{border-collapse:collapse;width:100%;font-size:14.5px;font-variant-numeric:tabular-nums;"
    "margin:10px 0 18px}\n",
    "caption{text-align:left;color:var(--soft);font-size:14px;padding:0 0 6px}\n",
    "th{font-weight:600;text-align:right;border-bottom:2px solid var(--deep);padding:7px 10px;"
    "vertical-align:bottom}\n",
    "td{text-align:right;border-bottom:1px solid var(--rule);padding:7px 10px}\n",
    "th.t,td.t,td.w{text-align:left}td{white-space:nowrap}td.w{white-space:normal;min-width:190px}tbody "
    "tr:hover{background:#f3efe2}tr.first td{font-weight:600}\n",
    ".scroll{overflow-x:auto}.note{font-size:14px;color:var(--soft);max-width:80ch}\n",
    "figure{margin:14px 0 20px;background:var(--card);border:1px solid var(--rule);padding:16px 18px 12px}\n",
    "figcaption{font-size:14px;color:var(--soft);margin-top:6px;max-width:90ch}\n",
    ".pair{display:grid;grid-template-columns:1fr 1fr;gap:14px 24px}\n",
    "details{margin:8px 0 0;font-size:14px}summary{cursor:pointer;color:var(--deep);text-decoration:underline}\n",
    ".mark{font-size:13px;font-weight:600;color:var(--event)}\n",
    "svg{display:block;width:100%;height:auto;font-family:system-ui,'DejaVu Sans',sans-serif}\n",
    "svg text{font-size:12.5px;fill:var(--ink)}svg .tick{fill:var(--soft)}svg .unit{fill:var(--soft);"
    "font-size:12.5px}\n",
    "svg .name{font-weight:600;font-size:14px}svg .value{font-weight:600;font-size:14px}\n",
    ".grid{stroke:#e7e2d4;stroke-width:1}.axis{stroke:var(--ink);stroke-width:1.2}.zero{stroke:var(--ink);"
    "stroke-width:1.2}\n",
    ".found{fill:var(--found);fill-opacity:.9}circle.missed{fill:var(--card);stroke:var(--missed);"
    "stroke-width:2}\n",
    "path.aside{fill:var(--card);stroke:var(--aside);stroke-width:2}.event{stroke:var(--event);"
    "stroke-width:1.6;stroke-dasharray:5 4}svg .event-label{fill:var(--event);font-size:12px}\n",
    ".wide{fill:#bcd9cd}.narrow{fill:#7db3a3}.point{fill:var(--found);stroke:var(--card);stroke-width:1.5}"
    "path.itt{fill:var(--card);stroke:var(--missed);stroke-width:2}\n",
    ".whisker{stroke:var(--found);stroke-width:2}.extent{stroke:var(--found);stroke-width:2;"
    "stroke-opacity:.45}.band{fill:#e9d3a2;fill-opacity:.75}\n",
    ".residual{fill:var(--found);fill-opacity:.7}.median{stroke:var(--missed);stroke-width:3}\n",
    ".bar{display:inline-block;height:12px;background:var(--found);vertical-align:middle;border-radius:1px}"
    ".bar.none{background:var(--missed)}\n",
    ".legend{display:flex;flex-wrap:wrap;gap:4px 24px;font-size:14px;margin:0 0 8px}.legend svg{width:18px;"
    "height:14px;display:inline-block;vertical-align:-2px;margin-right:6px}\n",
    "footer{margin-top:44px;border-top:1px solid var(--rule);padding:18px 0 40px;color:var(--soft);"
    "font-size:14px}\n",
    "@media(max-width:760px){.keys{grid-template-columns:1fr 1fr}.pair{grid-template-columns:1fr}"
    "dl{grid-template-columns:1fr}dt{border:0;padding-bottom:0}dd{padding-top:2px}h1{font-size:30px}}\n",
    "@media print{nav{display:none}body{background:#fff;font-size:12px}header{background:#fff;color:#000;"
    "padding:0 0 12px}header p,header .kind{color:#333}section{break-inside:avoid-page;padding-top:18px}"
    "figure{break-inside:avoid}}\n",
    ".states{list-style:none;display:flex;flex-wrap:wrap;gap:8px 30px;margin:0 0 12px;padding:12px 18px;"
    "background:var(--card);border:1px solid var(--rule)}.states b{font-size:19px;font-variant-numeric:tabular-nums}\n",
    NULL,
};
