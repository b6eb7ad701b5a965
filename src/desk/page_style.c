/* desk/page_style.c - how a page looks: on a phone, at a desk, on paper */
/* SPDX-License-Identifier: BSD-2-Clause */
#include "desk/page.h"

/*
 * Kinds of damage differ by pattern before they differ by colour: dots, strokes, solid. On a phone each row of a table
 * is a small card, so nothing is ever wider than the screen.
 */
static const char *const rules[] = {
    ":root{--ink:#16242e;--soft:#566570;--line:#cfdae1;--paper:#f4f8fa;--card:#fff;--deep:#1d5b7a;--lost:#101418}",
    "*{box-sizing:border-box}",
    "html{color-scheme:light;-webkit-text-size-adjust:100%}",
    "body{margin:0;background:var(--paper);color:var(--ink);font:16px/1.5 system-ui,'DejaVu Sans',sans-serif}",
    "main,header,footer{max-width:66rem;margin:0 auto;padding:0 1rem}",
    "header{padding-top:2rem}",
    "h1,h2,h3{font-family:Georgia,'DejaVu Serif',serif;font-weight:600;line-height:1.2;margin:0}",
    "h1{font-size:1.9rem}h2{font-size:1.3rem;margin:2.2rem 0 .8rem}h3{font-size:1.1rem;overflow-wrap:anywhere}",
    "p{margin:.4rem 0}.lead{font-size:1.05rem;max-width:46rem}.soft{color:var(--soft);font-size:.875rem}",
    ".place{color:var(--soft);font-size:.875rem;overflow-wrap:anywhere;margin:.1rem 0 0}",
    "a{color:var(--deep)}time,code{white-space:nowrap}",
    /* the table: on a phone each row is a small card of its own */
    "table,tbody,tr,th,td{display:block}thead{display:none}",
    "table{background:var(--card);border:1px solid var(--line);border-left:.35rem solid var(--lost)}",
    "tr{padding:.6rem .8rem;border-top:1px solid var(--line)}tr:first-child{border-top:0}",
    "th,td{text-align:left;vertical-align:top;overflow-wrap:anywhere}td+td{font-weight:600}",
    ".calm{background:var(--card);border:1px solid var(--line);border-left:.35rem solid var(--deep)}",
    ".calm{padding:.7rem 1rem}",
    /* the shelf */
    ".shelf{display:grid;grid-template-columns:minmax(0,1fr);gap:1rem}",
    "article{background:var(--card);border:1px solid var(--line);border-radius:.5rem;padding:1rem;break-inside:avoid}",
    ".top{display:flex;flex-wrap:wrap;gap:.5rem 1rem;justify-content:space-between;align-items:flex-start}",
    ".top>div{min-width:0;flex:1 1 14rem}",
    ".verdict{border:1.5px solid var(--ink);border-radius:1rem;padding:.1rem .75rem;font-size:.875rem;font-weight:600}",
    ".verdict.sound{border-color:var(--deep);color:var(--deep)}",
    ".verdict.lost{background:var(--lost);border-color:var(--lost);color:#fff}",
    ".verdict.waits{border-style:dashed;color:var(--soft);border-color:var(--soft)}",
    "figure{margin:.8rem 0 0}figcaption{font-size:.875rem;color:var(--soft);margin-top:.3rem}",
    "svg{display:block;width:100%}.peaks{height:2.2rem}",
    ".core{height:3.4rem;border:1.5px solid var(--ink);border-radius:1.1rem/50%;overflow:hidden}",
    ".core svg{height:100%}",
    ".ends{display:flex;justify-content:space-between;gap:1rem;font-size:.8rem;color:var(--soft);margin-top:.2rem}",
    ".pair{display:grid;grid-template-columns:minmax(0,1fr);gap:0 2rem;align-items:start}",
    "dl{display:grid;grid-template-columns:max-content 1fr;gap:.15rem 1rem;margin:.9rem 0 0;font-size:.925rem}",
    "dt{color:var(--soft)}dd{margin:0}",
    ".trend svg{height:5.2rem}",
    ".warning{border:1.5px solid var(--ink);border-left-width:.5rem;padding:.5rem .75rem;margin:.9rem 0 0}",
    ".warning{font-weight:600}",
    ".legend{display:flex;flex-wrap:wrap;gap:.4rem 1.4rem;font-size:.875rem;padding:0;margin:0 0 1rem;list-style:none}",
    ".legend li{display:flex;align-items:center;gap:.5rem}",
    ".legend svg{width:2rem;height:1.2rem;border:1px solid var(--ink);border-radius:.25rem}",
    "footer{padding-top:1.5rem;padding-bottom:3rem}",
    /* a desk, and paper */
    "@media(min-width:48rem),print{.pair{grid-template-columns:minmax(0,2fr) minmax(0,3fr)}",
    "table{display:table;border-collapse:collapse;width:100%}",
    "thead{display:table-header-group}tbody{display:table-row-group}",
    "tr{display:table-row}th,td{display:table-cell;padding:.55rem .8rem;border-top:1px solid var(--line)}",
    "thead th{font-size:.8rem;color:var(--soft);border-top:0}tbody th{width:26%}td{width:37%}}",
    "@media print{body{background:#fff;font-size:10.5pt}main,header,footer{max-width:none;padding:0}",
    "article,table,.calm{border-color:#888}*{-webkit-print-color-adjust:exact;print-color-adjust:exact}}",
};

void firn_page_style(FILE *out)
{
    fputs("<style>\n", out);
    for (size_t i = 0; i < sizeof rules / sizeof rules[0]; i++)
        fprintf(out, "%s\n", rules[i]);
    fputs("</style>\n", out);
}
