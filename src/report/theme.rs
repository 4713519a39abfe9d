//! Colours, type and layout of the page and of the figures.
//!
//! Line colours come from the palette of Okabe and Ito (2008), whose hues stay apart in the common
//! kinds of colour blindness; on white only those with a contrast of 3:1 or better are used. Colour
//! never stands alone: series differ in marker, dash or hatching too.

/// A colour by name: on white, on dark.
const COLOURS: [(&str, &str, &str); 12] = [
    ("paper", "#ffffff", "#14171b"),
    ("panel", "#f5f3ee", "#1d2127"),
    ("ink", "#1c2026", "#eae7e1"),
    ("muted", "#58606b", "#a9b0ba"),
    ("rule", "#dcd8cf", "#363c45"),
    ("blue", "#0072b2", "#56b4e9"),
    ("red", "#d55e00", "#f08a3c"),
    ("green", "#00875f", "#2fc39a"),
    ("purple", "#b5568d", "#dd94bd"),
    ("grey", "#7d838c", "#8b929c"),
    ("link", "#00598c", "#7cc4f0"),
    ("gold", "#8a6d1f", "#dcbf74"),
];

/// Rules of the figures; `$name` stands for a colour.
const FIGURES: &str = "\
svg text{font-family:system-ui,-apple-system,\"Segoe UI\",Roboto,\"Helvetica Neue\",Arial,\
\"DejaVu Sans\",sans-serif;fill:$ink;font-size:12px}
svg .paper{fill:$paper}
svg .tick{fill:$muted;font-size:11px}
svg .label{fill:$muted;font-size:12px}
svg .head{font-weight:600;font-size:12.5px}
svg .small{fill:$muted;font-size:11px}
svg .halo{paint-order:stroke;stroke:$paper;stroke-width:4px;stroke-linejoin:round}
svg .cap{fill:$ink;font-size:10px}
svg .grid{fill:none;stroke:$rule;stroke-width:1}
svg .zero{fill:none;stroke:$muted;stroke-width:1.2}
svg .axis{fill:none;stroke:$muted;stroke-width:1.2;stroke-dasharray:9 3 2 3}
svg .fine{fill:none;stroke:$muted;stroke-width:1}
svg .dash{fill:none;stroke:$muted;stroke-width:1.2;stroke-dasharray:4 4}
svg .ink-fill{fill:$ink}
svg .panel{fill:$panel}
svg .open{fill:$paper;stroke:$muted;stroke-width:1.4}
svg .bar{fill:none;stroke:$ink;stroke-width:1.6}
svg .unkept{fill:none;stroke:$grey;stroke-width:1.4}
";

/// Rules for one series colour; `%` stands for its name.
const SERIES: &str = "\
svg .%-line{fill:none;stroke:$%;stroke-width:2;stroke-linejoin:round}
svg .%-thick{fill:none;stroke:$%;stroke-width:7}
svg .%-thin{fill:none;stroke:$%;stroke-width:1.3}
svg .%-dash{fill:none;stroke:$%;stroke-width:1.6;stroke-dasharray:6 4}
svg .%-fill{fill:$%}
svg .%-mark{fill:$%;stroke:$paper;stroke-width:1}
svg .%-open{fill:$paper;stroke:$%;stroke-width:1.8}
svg .%-tint{fill:$%;fill-opacity:.16}
svg .%-faint{fill:$%;fill-opacity:.08}
svg .%-dots{fill:none;stroke:$%;stroke-width:3.4;stroke-linecap:round;stroke-opacity:.8}
svg .%-bold{fill:none;stroke:$%;stroke-width:4.4;stroke-linecap:round}
svg .%-hatch{fill:none;stroke:$%;stroke-width:2.5}
";

/// The figures' rules with each colour replaced.
fn figures_with(colour: impl Fn(&str, &str, &str) -> String) -> String {
    let mut sheet = FIGURES.to_owned();
    for series in ["blue", "red", "green", "purple", "grey"] {
        sheet.push_str(&SERIES.replace('%', series));
    }
    for (name, light, dark) in COLOURS {
        sheet = sheet.replace(&format!("${name}"), &colour(name, light, dark));
    }
    sheet
}

/// Style sheet of a stand-alone figure: plain colours, so that every viewer knows them.
pub(crate) fn figure_sheet() -> String {
    format!(
        "{}@media (prefers-color-scheme:dark){{\n{}}}\n",
        figures_with(|_, light, _| light.to_owned()),
        figures_with(|_, _, dark| dark.to_owned())
    )
}

/// Style sheet of the page.
pub(crate) fn page_sheet() -> String {
    let variables = |dark: bool| -> String {
        let each = COLOURS.map(|(name, light, night)| {
            ["--", name, ":", if dark { night } else { light }, ";"].concat()
        });
        each.concat()
    };
    format!(
        ":root{{color-scheme:light dark;{}}}\n@media screen and \
         (prefers-color-scheme:dark){{:root{{{}}}}}\n{}{PAGE}",
        variables(false),
        variables(true),
        figures_with(|name, _, _| format!("var(--{name})"))
    )
}

/// Rules of the page.
const PAGE: &str = r#"
*{box-sizing:border-box}
html{scroll-behavior:smooth;-webkit-text-size-adjust:100%}
@media (prefers-reduced-motion:reduce){html{scroll-behavior:auto}}
body{margin:0;background:var(--paper);color:var(--ink);font:16px/1.55 system-ui,-apple-system,
"Segoe UI",Roboto,"Helvetica Neue",Arial,"DejaVu Sans",sans-serif}
.skip{position:absolute;left:-999em}
.skip:focus{left:1rem;top:1rem;background:var(--paper);padding:.5rem 1rem;z-index:2}
:focus-visible{outline:3px solid var(--blue);outline-offset:2px}
a{color:var(--link);text-underline-offset:.15em}
.page{max-width:1200px;margin:0 auto;padding:0 28px 64px}
.mast{display:flex;flex-wrap:wrap;justify-content:space-between;gap:4px 32px;
border-bottom:2px solid var(--ink);padding:22px 0 10px;align-items:baseline}
h1,h2,.sentence{font-family:"Iowan Old Style","Palatino Linotype",Palatino,"Book Antiqua",Georgia,
"DejaVu Serif",serif}
h1{font-size:1.3rem;line-height:1.25;margin:0;font-weight:600}
.when{margin:0;color:var(--muted);font-size:.9rem}
.first{display:grid;grid-template-columns:minmax(0,1fr) minmax(0,490px);gap:8px 56px;
padding-top:22px}
.first figure{margin:0}
.sentence{font-size:1.26rem;line-height:1.42;margin:0 0 20px}
.key{display:grid;grid-template-columns:repeat(6,minmax(0,1fr));gap:1px;margin:18px 0 0;
background:var(--rule);border:1px solid var(--rule)}
.key.pairs{grid-template-columns:repeat(2,minmax(0,1fr))}
.key>div{background:var(--paper);padding:12px 14px 13px}
.key dt{font-size:.8rem;color:var(--muted);line-height:1.3}
.key .v{font-size:1.16rem;font-weight:600;margin:3px 0 2px;line-height:1.25;overflow-wrap:anywhere;
font-variant-numeric:tabular-nums}
.key .s{font-size:.82rem;color:var(--muted);margin:0;line-height:1.4}
.key dd{margin:0}
.key .u{font-size:.82em;font-weight:400}
.notes{border-left:4px solid var(--red);background:var(--panel);padding:12px 18px;margin:26px 0 0}
.notes h2{font-size:1.05rem;margin:0 0 4px}
.notes ul{margin:0;padding-left:1.1em}
.notes li{margin:.3em 0}
code{font-family:ui-monospace,"DejaVu Sans Mono",Menlo,Consolas,monospace;font-size:.85em;
overflow-wrap:anywhere}
nav{margin:26px 0 0;font-size:.9rem}
nav ul{list-style:none;display:flex;flex-wrap:wrap;gap:4px 20px;padding:0;margin:0}
nav li a{display:inline-block;padding:3px 0}
section{border-top:1px solid var(--rule);margin-top:44px;padding-top:20px}
h2{font-size:1.45rem;line-height:1.25;margin:0 0 .6rem;font-weight:600}
h3{font-size:1.02rem;margin:1.8rem 0 .4rem}
section>p,section>ul,section>ol{max-width:46rem}
p{margin:.5rem 0 .8rem}
.plate{display:grid;grid-template-columns:minmax(0,720px) minmax(0,1fr);gap:12px 40px;
margin:18px 0 8px;align-items:start}
.plate figcaption{font-size:.92rem;line-height:1.5;color:var(--ink);padding-top:2px}
.first figcaption{font-size:.86rem;color:var(--muted);line-height:1.45}
.first .ring{justify-self:center;width:100%}
figcaption strong{display:block;font-size:.98rem;margin-bottom:.25rem}
figcaption p{margin:0 0 .5rem}
svg{display:block;max-width:100%;height:auto}
svg.narrow{display:none}
svg.shared{position:absolute;width:0;height:0}
@media (max-width:1080px){
.key{grid-template-columns:repeat(3,minmax(0,1fr))}
.first,.plate{grid-template-columns:minmax(0,1fr)}
.plate figcaption{max-width:46rem}}
@media screen and (max-width:640px){
.page{padding:0 16px 48px}
svg.wide{display:none}svg.narrow{display:block}
.sentence{font-size:1.14rem}
.key{grid-template-columns:repeat(2,minmax(0,1fr))}
.key>div{padding:10px}.key .v{font-size:.95rem}
h2{font-size:1.25rem}}
details{margin:.4rem 0 .9rem}
summary{cursor:pointer;color:var(--link);font-size:.92rem;padding:4px 0}
.scroll{overflow-x:auto;max-width:100%}
.data .scroll{max-height:32rem;overflow-y:auto}
.folds{display:flex;flex-wrap:wrap;gap:0 26px}
.folds details[open]{flex-basis:100%;min-width:0}
table{border-collapse:collapse;font-size:.87rem;line-height:1.4;margin:.4rem 0 .6rem;
font-variant-numeric:tabular-nums}
caption{text-align:left;color:var(--muted);padding:0 0 .4rem;font-size:.87rem}
th,td{text-align:left;vertical-align:top;padding:5px 16px 5px 0;border-bottom:1px solid var(--rule);
font-weight:400;min-width:3.2rem}
th:last-child,td:last-child{padding-right:4px}
thead th{color:var(--muted);border-bottom:1.5px solid var(--muted);vertical-align:bottom;
line-height:1.25}
.n{text-align:right;white-space:nowrap}
thead .n{white-space:normal}
tbody th{min-width:7.5rem}
tbody th.n{min-width:3.2rem}
td:not(.n){max-width:34rem;min-width:4rem}
pre{font-family:ui-monospace,"DejaVu Sans Mono",Menlo,Consolas,monospace;font-size:.8rem;
overflow-x:auto;background:var(--panel);padding:12px 14px;line-height:1.45}
.care{border-left:4px solid var(--red);padding-left:18px}
.care p,.care li{max-width:46rem}
footer{margin-top:48px;padding-top:14px;border-top:2px solid var(--ink);color:var(--muted);
font-size:.85rem}
@page{margin:16mm 14mm}
@media print{
:root{color-scheme:light}
body{font-size:10pt;line-height:1.4}
.page{max-width:none;padding:0}
nav,.skip{display:none}
.plate{grid-template-columns:minmax(0,1fr)}
.first{grid-template-columns:minmax(0,1fr) 82mm;gap:4px 8mm;padding-top:4mm}
.folds details:not(:first-child){display:none}
.folds summary{display:none}
.key{grid-template-columns:repeat(3,minmax(0,1fr))}
svg.wide{max-width:min(165mm,100%)}
.sentence{font-size:12.5pt}
section{margin-top:18pt;padding-top:10pt}
figure,.key>div,tr,.notes,.care{break-inside:avoid}
h2,h3,caption{break-after:avoid}
thead{display:table-header-group}
.scroll,.data .scroll{overflow:visible;max-height:none}
table{font-size:8.5pt}th,td,tbody th,tbody th.n,td:not(.n){padding:3px 9px 3px 0;min-width:0}
.wide-table table{font-size:6pt}
.wide-table th,.wide-table td,.wide-table tbody th,.wide-table td:not(.n){padding:2px 5px 2px 0}
details.small::details-content{content-visibility:visible;display:block;height:auto}
details.data:not(.small){display:none}
a{color:inherit;text-decoration:none}}
"#;

#[cfg(test)]
mod tests {
    use super::*;

    /// Relative luminance and contrast as WCAG 2.2 defines them.
    fn contrast(a: &str, b: &str) -> f64 {
        let luminance = |hex: &str| -> f64 {
            [(1, 0.2126), (3, 0.7152), (5, 0.0722)]
                .into_iter()
                .map(|(at, share)| {
                    let raw = u8::from_str_radix(&hex[at..at + 2], 16).expect("a hex colour");
                    let s = f64::from(raw) / 255.0;
                    let linear = if s <= 0.04045 {
                        s / 12.92
                    } else {
                        ((s + 0.055) / 1.055).powf(2.4)
                    };
                    share * linear
                })
                .sum()
        };
        let (a, b) = (luminance(a), luminance(b));
        (a.max(b) + 0.05) / (a.min(b) + 0.05)
    }

    // Source: WCAG 2.2, success criteria 1.4.3 (text 4.5:1) and 1.4.11 (graphics 3:1).
    #[test]
    fn colours_have_the_contrast_that_wcag_asks_for() {
        let of = |name: &str| {
            COLOURS
                .into_iter()
                .find(|colour| colour.0 == name)
                .expect("a colour of the list")
        };
        for (mode, pick) in [("light", 0), ("dark", 1)].map(|(mode, dark)| {
            (
                mode,
                move |c: (&str, &'static str, &'static str)| if dark == 1 { c.2 } else { c.1 },
            )
        }) {
            for name in ["ink", "muted", "link"] {
                for ground in ["paper", "panel"] {
                    let found = contrast(pick(of(name)), pick(of(ground)));
                    assert!(found >= 4.5, "{mode} {name} on {ground}: {found}");
                }
            }
            for name in ["blue", "red", "green", "purple", "grey"] {
                let found = contrast(pick(of(name)), pick(of("paper")));
                assert!(found >= 3.0, "{mode} {name}: {found}");
            }
        }
    }

    #[test]
    fn no_colour_name_is_left_unresolved() {
        assert!(!figure_sheet().contains('$') && !page_sheet().contains('$'));
    }
}
