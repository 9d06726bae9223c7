"""How the HTML report and its drawings look: one theme in light and dark, screen and paper.

Colours are named by what they say: ``low`` and ``high`` are the two ends of the band. Every pair
of text and ground has a contrast of at least 4.5 (WCAG 2.1 AA), which a test works out.
"""

from __future__ import annotations

LIGHT = {
    "paper": "#fcfbf7",
    "inset": "#f3f1e9",
    "ink": "#1c2329",
    "faint": "#56606a",
    "rule": "#d9d5c8",
    "grid": "#e4e0d5",
    "low": "#1d5a96",
    "high": "#9c3d16",
    "limit": "#755600",
    "alarm": "#a3151f",
}
DARK = {
    "paper": "#15191d",
    "inset": "#1e242a",
    "ink": "#e7e4da",
    "faint": "#a7afb7",
    "rule": "#3b434b",
    "grid": "#2b3239",
    "low": "#86b6ee",
    "high": "#f0a37c",
    "limit": "#d9b65f",
    "alarm": "#ff9a94",
}


def _variables(colours: dict[str, str]) -> str:
    return "".join(f"--{name}:{value};" for name, value in colours.items())


THEME = (
    f":root{{color-scheme:light dark;{_variables(LIGHT)}}}"
    f"@media screen and (prefers-color-scheme:dark){{:root{{{_variables(DARK)}}}}}"
)

_SANS = "system-ui,'Segoe UI',Roboto,'Helvetica Neue',Arial,'Liberation Sans',sans-serif"
_SERIF = "Charter,'Bitstream Charter','Sitka Text',Cambria,Georgia,'Liberation Serif',serif"

PLOT_STYLE = f"""
svg text{{font:12px {_SANS};fill:var(--ink)}}
svg .pg{{fill:var(--paper)}}
svg text.hd{{font:600 15px {_SERIF}}}
svg .mid{{text-anchor:middle}}
svg .end{{text-anchor:end}}
svg text.tk,svg text.ax{{fill:var(--faint)}}
svg .gr{{stroke:var(--grid);fill:none}}
svg .base{{stroke:var(--faint)}}
svg .c-exact{{stroke:var(--ink);stroke-width:2;fill:none;stroke-linejoin:round}}
svg .c-estimate{{stroke:var(--low);stroke-width:1.5;stroke-dasharray:6 4;fill:none}}
svg .c-simulated{{stroke:var(--high);stroke-width:1.3;fill:none}}
svg .mk{{fill:var(--paper);stroke:var(--ink);stroke-width:2}}
svg text.ml{{font-weight:600;paint-order:stroke;stroke:var(--paper);stroke-width:4px}}
svg .ht{{stroke:var(--limit);stroke-width:1.6;opacity:.5}}
svg .lm{{stroke:var(--limit);stroke-opacity:.6}}
svg text.ll{{fill:var(--limit);font-weight:600;paint-order:stroke;stroke:var(--paper);
stroke-width:5px}}
svg .ld{{stroke:var(--rule);fill:none}}
svg .tr{{fill:var(--paper);stroke-width:1.4}}
svg .low{{stroke:var(--low)}}
svg .high{{stroke:var(--high)}}
svg .tr.st.low{{fill:var(--low)}}
svg .tr.st.high{{fill:var(--high)}}
svg text.tn{{stroke:none}}
svg text.tn.low{{fill:var(--low)}}
svg text.tn.high{{fill:var(--high)}}
svg text.st{{font-weight:700}}
"""

_PAGE = f"""
*{{box-sizing:border-box}}
html{{-webkit-text-size-adjust:100%}}
body{{margin:0;background:var(--paper);color:var(--ink);font:15px/1.5 {_SANS};
font-variant-numeric:tabular-nums lining-nums}}
main,header,footer,nav{{max-width:72rem;margin:0 auto;padding:0 1.5rem}}
h1{{font:600 1.75rem/1.2 {_SERIF};margin:2.2rem 0 .3rem;text-wrap:balance;overflow-wrap:anywhere}}
h2{{font:600 1.15rem/1.3 {_SERIF};margin:0}}
h3{{font:600 1rem/1.4 {_SANS};margin:1.8rem 0 .6rem}}
p{{margin:.4rem 0}}
a{{color:var(--low);text-underline-offset:.15em}}
:focus-visible{{outline:3px solid var(--low);outline-offset:2px}}
.facts,.aside,.small{{color:var(--faint);font-size:.87rem;overflow-wrap:anywhere}}
.skip{{position:absolute;left:-99rem}}
.skip:focus{{left:1rem;top:.5rem;background:var(--paper);padding:.4rem .8rem;z-index:2}}
nav ul{{list-style:none;margin:.9rem 0 0;padding:0;display:flex;flex-wrap:wrap;gap:.2rem 1.3rem;
font-size:.87rem}}
section{{border-top:1px solid var(--rule);margin-top:2.2rem;padding-top:1.3rem;display:grid;
grid-template-columns:10.5rem minmax(0,1fr);gap:0 2rem}}
.bd>:first-child{{margin-top:0}}
.aside{{line-height:1.45;margin-top:.5rem}}
.verdict{{display:flex;flex-wrap:wrap;gap:1.1rem 3rem;margin:0;padding:0}}
.verdict div{{min-width:11rem;flex:1 1 11rem}}
.verdict dt{{color:var(--faint);font-size:.87rem}}
.verdict dd{{margin:0}}
.big{{font:600 1.9rem/1.25 {_SERIF};display:block;white-space:nowrap}}
.verdict+p{{margin-top:1rem}}
.verdict .by{{display:block;font-size:.9rem;line-height:1.4}}
ul.notes,ul.plain{{margin:.8rem 0 0;padding-left:1.1rem}}
ul.notes li,ul.plain li{{margin:.25rem 0;max-width:46rem}}
.nm{{font-weight:600}}
.low-c{{color:var(--low)}}
.high-c{{color:var(--high)}}
.alarm{{color:var(--alarm);font-weight:600}}
.vh{{position:absolute;width:1px;height:1px;overflow:hidden;clip-path:inset(50%);white-space:nowrap}}
.ex{{font-family:{_SERIF};font-size:1.02em;line-height:1.75;overflow-wrap:anywhere}}
.ex .nm{{font-weight:400}}
.ex .op{{padding:0 .28em}}
.ex .dot{{padding:0 .1em}}
sub{{font-size:.72em;line-height:0;font-style:normal}}
.fr{{display:inline-flex;flex-direction:column;vertical-align:middle;text-align:center;
line-height:1.3;margin:.1em .15em;font-size:.93em}}
.fr>:first-child{{padding:0 .2em .3em}}
.fr>:last-child{{border-top:1px solid currentColor;padding:.1em .2em 0}}
.sc{{overflow-x:auto;margin:.9rem 0 0;position:relative}}
table{{border-collapse:collapse;font-size:.9rem}}
caption{{text-align:left;color:var(--faint);font-size:.87rem;padding-bottom:.4rem}}
caption span{{display:inline-block;max-width:calc(100vw - 2rem);white-space:normal}}
th,td{{padding:.36rem 1rem .36rem 0;text-align:left;vertical-align:baseline;white-space:nowrap}}
.w{{white-space:normal;min-width:16rem}}
thead th{{font-weight:400;color:var(--faint);border-bottom:1px solid var(--faint);
vertical-align:bottom;line-height:1.25}}
thead td{{border-bottom:1px solid var(--faint)}}
tbody th{{font-weight:600;white-space:nowrap}}
tbody tr+tr>*{{border-top:1px solid var(--rule)}}
.r{{text-align:right}}
.n{{white-space:nowrap}}
.pc{{display:inline-block;max-width:100%}}
tr:has(.sets)>*{{background:var(--inset)}}
.sets::before{{content:"▸ ";font-weight:400}}
tbody th:has(.sets){{padding-left:.3rem}}
.bar{{display:inline-block;width:8rem;height:.72rem;vertical-align:-.04rem;margin-right:.7rem}}
.bar .tk0{{fill:var(--inset)}}
.bar .low{{fill:var(--low);stroke:none}}
.bar .high{{fill:var(--high);stroke:none}}
ol.stages{{list-style:none;margin:0;padding:0;display:flex;flex-wrap:wrap}}
ol.stages>li{{flex:1 1 13rem;max-width:26rem;min-width:11rem;padding:0 0 1.2rem}}
ol.stages>li.port{{flex:0 0 5rem;min-width:4rem}}
.glyph{{position:relative;height:76px;display:flex;justify-content:center;align-items:center}}
.glyph::before{{content:"";position:absolute;left:0;right:0;top:50%;
border-top:1.6px solid var(--ink)}}
.port .glyph{{justify-content:flex-start}}
.port.last .glyph{{justify-content:flex-end}}
.glyph svg{{position:relative}}
.glyph svg .bx{{fill:var(--paper);stroke:var(--ink);stroke-width:1.6}}
.glyph svg text{{font:600 15px {_SERIF}}}
.node{{position:absolute;top:calc(50% - 1.5rem);font-size:.82rem;color:var(--faint);
max-width:44%;overflow:hidden;text-overflow:ellipsis;white-space:nowrap}}
.node.in{{left:.3rem}}
.node.out{{right:.3rem}}
.st-t{{padding:0 1.1rem 0 .3rem}}
.st-t p{{margin:.15rem 0}}
.st-t .g{{font:600 1.25rem/1.4 {_SERIF}}}
figure{{margin:0}}
.plot .narrow{{display:none}}
.plot svg{{display:block;max-width:100%;height:auto}}
.seen{{display:flex;flex-wrap:wrap;gap:1.6rem 2.6rem;margin-top:1rem;align-items:flex-start}}
.seen figure{{flex:1 1 19rem;max-width:100%;min-width:0;break-inside:avoid}}
.seen figure.broad{{flex-basis:100%}}
.seen figcaption{{max-width:36rem;font-size:.93rem}}
.seen .sc{{margin-top:.6rem}}
.sch{{display:block}}
.sch .wr,.sch .rs{{stroke:var(--ink);stroke-width:1.5;fill:none}}
.sch .rs{{fill:var(--paper)}}
.sch .im{{stroke-dasharray:4 3}}
.sch .th{{stroke:var(--faint);stroke-width:1;stroke-dasharray:3 3;fill:none}}
.sch .pl{{stroke:var(--low);stroke-width:2.2;fill:none}}
.high-end .sch .pl{{stroke:var(--high)}}
.sch .tm{{fill:var(--paper);stroke:var(--ink);stroke-width:1.5}}
.sch text.lb{{font:13px {_SANS}}}
.sch .it{{font-style:italic;font-family:{_SERIF};font-size:14px}}
.sch .sb{{font-size:9.5px}}
.sch text.vl,.sch text.nd{{fill:var(--faint);font-size:12px}}
dl.sums{{display:grid;grid-template-columns:max-content minmax(0,1fr);gap:.2rem 1.2rem;
margin:1.1rem 0 0;font-size:.93rem}}
dl.sums dt{{color:var(--faint)}}
dl.sums dd{{margin:0}}
.problem{{margin:0 0 1.1rem;max-width:52rem;break-inside:avoid}}
.problem pre{{margin:.3rem 0;padding:.5rem .8rem;background:var(--inset);overflow-x:auto;
font:13px/1.5 ui-monospace,'Cascadia Mono',Menlo,Consolas,'Liberation Mono',monospace}}
mark{{background:none;color:inherit;border-bottom:2px solid var(--alarm)}}
.nodes{{columns:11rem;column-gap:2.5rem;margin:.8rem 0 0;padding:0;list-style:none;font-size:.9rem}}
.nodes li{{display:flex;justify-content:space-between;gap:1rem;border-bottom:1px solid var(--rule);
padding:.25rem 0;break-inside:avoid}}
.nodes span{{overflow-wrap:anywhere}}
.nodes b{{font-weight:400;white-space:nowrap}}
footer{{border-top:1px solid var(--rule);margin-top:2.6rem;padding-top:1rem;padding-bottom:2.5rem;
font-size:.87rem}}
@media (max-width:54rem){{
main,header,footer,nav{{padding:0 1rem}}
footer{{padding-top:1rem}}
section{{display:block}}
.mg{{margin-bottom:.9rem}}
h1{{font-size:1.4rem;margin-top:1.4rem}}
}}
@media screen and (max-width:40rem){{
.plot .wide{{display:none}}
.plot .narrow{{display:block}}
.big{{font-size:1.6rem}}
.bar{{width:6.2rem}}
ol.stages>li{{flex-basis:100%}}
ol.stages>li.port{{flex-basis:100%;padding-bottom:0}}
ol.stages>li.port .glyph{{height:34px;justify-content:flex-start;gap:.5rem}}
.port .node{{position:static}}
ol.stages>li.port .glyph::before{{display:none}}
}}
@page{{size:A4;margin:14mm 13mm}}
@media print{{
:root{{--paper:#fff}}
html{{font-size:13px}}
body{{font-size:1rem}}
main,header,footer,nav{{max-width:none;padding:0}}
nav,.skip{{display:none}}
h1{{margin-top:0}}
section{{display:block;margin-top:13pt;padding-top:8pt}}
.mg{{margin-bottom:6pt;break-after:avoid}}
h2,h3,caption{{break-after:avoid}}
tr,.sc,.plot,ol.stages>li,.problem{{break-inside:avoid}}
thead{{display:table-header-group}}
.sc{{overflow:visible}}
.sch{{max-width:100%;height:auto}}
.plot svg{{max-width:14.5cm}}
th,td{{padding-right:8pt}}
}}
"""

STYLE = (THEME + PLOT_STYLE + _PAGE).replace("\n", "")
