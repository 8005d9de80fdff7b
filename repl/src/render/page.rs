//! A report as one page of HTML: no scripts, nothing fetched, legible on a phone, in the dark and on paper.

use std::fmt::Write;

use lysocline_engine::present::plot_svg::{self, escaped};
use lysocline_engine::present::{Column, Style, Table, notation, number, table::FAILURE};
use lysocline_engine::script::record::Recorded;
use lysocline_engine::script::{Record, Shown};
use pulldown_cmark::{Event, Options, Parser, Tag};

use super::highlight;
use super::report::{Block, Report};

/// What marks a page as ours, so that a later run may replace it.
pub const MARK: &str = "<meta name=\"generator\" content=\"lysocline\">";

/// Browsers read the file again every two seconds, and stay where they are on the page.
const RELOAD: &str = "<meta http-equiv=\"refresh\" content=\"2\">\n";

/// The page.
pub fn draw(report: &Report) -> String {
    let mut body = String::new();
    let mut reload = "";
    if let Some(when) = &report.watched {
        reload = RELOAD;
        let _ = writeln!(
            body,
            "<p class=\"unit\">Made {}; reloads itself while <code>lysocline watch</code> runs.</p>",
            escaped(when)
        );
        body.push_str(&failure(report));
    }
    if !matches!(report.blocks.first(), Some(Block::Prose(text)) if text.starts_with("# ")) {
        let _ = writeln!(body, "<h1>{}</h1>", escaped(&report.title));
    }
    for run in report
        .blocks
        .chunk_by(|a, b| matches!((a, b), (Block::Output(Shown::Record(_)), Block::Output(Shown::Record(_)))))
    {
        match run {
            [Block::Output(Shown::Record(_)), ..] => body.push_str(&kept(run)),
            _ => run.iter().for_each(|block| body.push_str(&self::block(block))),
        }
    }
    if report.watched.is_none() {
        body.push_str(&failure(report));
    }
    body.push_str(&ending(report));
    format!(
        "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n\
         <meta name=\"viewport\" content=\"width=device-width, initial-scale=1\">\n\
         <meta name=\"color-scheme\" content=\"light dark\">\n{MARK}\n{reload}<title>{}</title>\n<style>{STYLE}{}</style>\n</head>\n\
         <body>\n<main>\n{body}</main>\n</body>\n</html>\n",
        escaped(&report.title),
        plot_svg::style_sheet()
    )
}

/// Why the script broke off: at the top of a page somebody works on, where it broke off on others.
fn failure(report: &Report) -> String {
    let Some(failure) = &report.failure else { return String::new() };
    format!(
        "<div class=\"failure\" role=\"alert\"><strong>The script did not come to its end.</strong><pre>{}</pre></div>\n",
        escaped(failure)
    )
}

fn block(block: &Block) -> String {
    match block {
        Block::Prose(text) => prose(text),
        Block::Code(text) => {
            format!("<pre class=\"code\" tabindex=\"0\"><code>{}</code></pre>\n", highlight::html(text))
        }
        Block::Output(Shown::Text(text)) => {
            format!("<pre class=\"out\" tabindex=\"0\">{}</pre>\n", escaped(text))
        }
        Block::Output(Shown::Table(table)) => self::table(table),
        Block::Output(Shown::Plot(plot)) => format!("<figure>{}</figure>\n", plot_svg::fragment(plot)),
        Block::Output(Shown::Message(text)) => format!("<p class=\"note\">{}</p>\n", escaped(text)),
        Block::Output(Shown::Record(_) | Shown::Statement(_)) => String::new(),
    }
}

/// Neighbouring records as one short list.
fn kept(run: &[Block]) -> String {
    let items = run.iter().filter_map(|block| match block {
        Block::Output(Shown::Record(record)) => {
            let value = value(record);
            let (sign, what) = match record.expected {
                Some(_) => ("✓", format!("{value}, as expected{}", within(record))),
                None => ("•", value),
            };
            Some(format!(
                "<li><span aria-hidden=\"true\">{sign}</span> {}: <strong>{what}</strong></li>",
                escaped(&record.label)
            ))
        }
        _ => None,
    });
    format!("<ul class=\"kept\">{}</ul>\n", items.collect::<String>())
}

fn within(record: &Record) -> String {
    let Some(expected) = record.expected else { return String::new() };
    format!(" ({} within {})", number::shown(expected.value), number::shown(expected.tolerance))
}

/// A recorded value with its uncertainty and unit.
pub fn value(record: &Record) -> String {
    match &record.value {
        Recorded::Text(text) => escaped(text),
        Recorded::Number { value, sigma, unit } => {
            let style = Style::default();
            let number = match sigma {
                Some(sigma) if *sigma > 0.0 => number::shown_with_sigma(*value, *sigma, style),
                _ => number::shown(*value),
            };
            escaped(format!("{number} {}", notation::shown_unit(unit, style)).trim_end())
        }
    }
}

/// Markdown without raw HTML: a report fetches nothing and runs nothing, whatever its prose says.
fn prose(text: &str) -> String {
    let options = Options::ENABLE_TABLES | Options::ENABLE_FOOTNOTES | Options::ENABLE_STRIKETHROUGH;
    let safe = Parser::new_ext(text, options).map(|event| match event {
        Event::Html(html) | Event::InlineHtml(html) => Event::Text(html),
        Event::Start(Tag::Image { dest_url, title, .. }) => Event::Start(Tag::Link {
            link_type: pulldown_cmark::LinkType::Inline,
            dest_url: harmless(&dest_url).into(),
            title,
            id: "".into(),
        }),
        Event::End(pulldown_cmark::TagEnd::Image) => Event::End(pulldown_cmark::TagEnd::Link),
        Event::Start(Tag::Link { link_type, dest_url, title, id }) => {
            Event::Start(Tag::Link { link_type, dest_url: harmless(&dest_url).into(), title, id })
        }
        other => other,
    });
    let mut html = String::new();
    pulldown_cmark::html::push_html(&mut html, safe);
    html
}

/// A link that only leads somewhere.
fn harmless(address: &str) -> String {
    let plain = ["https:", "http:", "mailto:", "doi:", "#"]
        .iter()
        .any(|start| address.to_lowercase().starts_with(start));
    let relative = !address.contains(':');
    if plain || relative { address.to_owned() } else { String::new() }
}

fn table(table: &Table) -> String {
    let style = Style::default();
    let columns: Vec<&Column> = table.columns().iter().filter(|c| c.title().name() != FAILURE).collect();
    let mut text = String::from("<div class=\"table\" tabindex=\"0\"><table>\n<thead><tr>");
    let class = |column: &Column| if column.is_numeric() { " class=\"n\"" } else { "" };
    for column in &columns {
        let unit = column.title().unit().map(|unit| {
            format!("<br><span class=\"unit\">{}</span>", escaped(&notation::shown_unit(unit, style)))
        });
        let _ = write!(
            text,
            "<th scope=\"col\"{}>{}{}</th>",
            class(column),
            escaped(&notation::shown_name(column.title(), style)),
            unit.unwrap_or_default()
        );
    }
    text.push_str("</tr></thead>\n<tbody>\n");
    let cells: Vec<Vec<String>> = columns.iter().map(|column| number::shown_column(column, style)).collect();
    for row in 0..table.n_rows() {
        text.push_str("<tr>");
        for (column, cells) in columns.iter().zip(&cells) {
            let _ = write!(text, "<td{}>{}</td>", class(column), escaped(cells[row].trim()));
        }
        text.push_str("</tr>\n");
        if let Some(reason) = table.failure(row) {
            let _ = writeln!(
                text,
                "<tr><td class=\"why\" colspan=\"{}\">row {row} failed: {}</td></tr>",
                columns.len().max(1),
                escaped(reason)
            );
        }
    }
    text.push_str("</tbody></table></div>\n");
    text
}

/// What stands below the script: recorded values, warnings, sources, cautions, how it was made.
fn ending(report: &Report) -> String {
    let mut text = String::new();
    let recorded: Vec<&Record> = report.records.iter().filter(|record| record.expected.is_none()).collect();
    if !recorded.is_empty() {
        text.push_str(
            "<section><h2>Recorded values</h2>\n<div class=\"table\" tabindex=\"0\"><table>\n<tbody>\n",
        );
        for record in recorded {
            let _ = writeln!(
                text,
                "<tr><th scope=\"row\">{}</th><td class=\"n\">{}</td></tr>",
                escaped(&record.label),
                value(record)
            );
        }
        text.push_str("</tbody></table></div></section>\n");
    }
    let warnings = report.warnings();
    if !warnings.is_empty() {
        let _ = writeln!(
            text,
            "<section><h2>Warnings</h2>\n<ul class=\"warnings\">{}</ul></section>",
            items(warnings.iter().map(|warning| escaped(warning)))
        );
    }
    if !report.sources.publications.is_empty() {
        let entry = |(source, equations): (&String, &std::collections::BTreeSet<String>)| {
            format!(
                "{}<br><span class=\"unit\">{}</span>",
                escaped(source),
                escaped(&super::report::taken(equations))
            )
        };
        let _ = writeln!(
            text,
            "<section><h2>Sources of the constants used</h2>\n<ol class=\"sources\">{}</ol></section>",
            items(report.sources.publications.iter().map(entry))
        );
    }
    let _ = writeln!(
        text,
        "<section><h2>Cautions</h2>\n<ul>{}</ul></section>\n<footer>{}</footer>",
        items(report.cautions().iter().map(|caution| escaped(caution))),
        report.making.iter().map(|fact| format!("<p>{}</p>", escaped(fact))).collect::<String>()
    );
    text
}

fn items(items: impl Iterator<Item = String>) -> String {
    items.map(|item| format!("<li>{item}</li>")).collect()
}

const STYLE: &str = "
:root{--paper:#fff;--ink:#1b1f24;--faint:#59636e;--line:#d7dbe0;--panel:#f5f6f8;--accent:#15507f;--warn:#8a4b00;--warn-paper:#fff6e8;
--c:#5c6670;--s:#0f6b57;--n:#8f2d6c;--k:#15507f;--f:#8a3c00}
@media screen and (prefers-color-scheme:dark){:root{--paper:#16191d;--ink:#e6e8eb;--faint:#a0a9b3;--line:#363c44;--panel:#1f2328;--accent:#8cc0f0;
--warn:#ffc680;--warn-paper:#2c2416;--c:#98a2ad;--s:#6fd3b8;--n:#e6a0cf;--k:#8cc0f0;--f:#f5ae7c}}
*{box-sizing:border-box}
html{-webkit-text-size-adjust:100%}
body{margin:0;background:var(--paper);color:var(--ink);font:1rem/1.6 system-ui,'Segoe UI','DejaVu Sans',sans-serif;overflow-wrap:break-word}
main{max-width:50rem;margin:0 auto;padding:1.5rem 1rem 3rem}
h1{font-size:1.75rem;line-height:1.25;margin:.5rem 0 1rem}
h2{font-size:1.25rem;line-height:1.3;margin:2rem 0 .6rem}
h3{font-size:1.05rem;margin:1.5rem 0 .5rem}
p,ul,ol{margin:.7rem 0}
a{color:var(--accent)}
pre{margin:.7rem 0;overflow-x:auto;font:.86rem/1.5 ui-monospace,'DejaVu Sans Mono',Menlo,Consolas,monospace;tab-size:4}
pre.code{background:var(--panel);border-left:3px solid var(--line);padding:.6rem .8rem}
pre.out{padding:.1rem .8rem;white-space:pre-wrap}
code{font-family:ui-monospace,'DejaVu Sans Mono',Menlo,Consolas,monospace}
:not(pre)>code{background:var(--panel);padding:.1em .3em;font-size:.9em}
.c{color:var(--c);font-style:italic}.s{color:var(--s)}.n{color:inherit}pre .n{color:var(--n)}.k{color:var(--k);font-weight:600}.f{color:var(--f)}
.table{overflow-x:auto;margin:.9rem 0}
table{border-collapse:collapse;font-size:.92rem;font-variant-numeric:tabular-nums}
th,td{padding:.25rem .75rem;text-align:left;vertical-align:baseline;border-bottom:1px solid var(--line)}
th:first-child,td:first-child{padding-left:.2rem}
thead th{border-bottom:2px solid var(--ink);vertical-align:bottom;line-height:1.3}
tbody th{font-weight:400}
td:not(.n){min-width:8rem}
td.n,th.n{text-align:right;white-space:nowrap}
.unit{color:var(--faint);font-weight:400;font-size:.85em}
.why{color:var(--warn);font-size:.88em}
figure{margin:1rem 0;overflow-x:auto}
figure svg{display:block;width:100%;height:auto;min-width:30rem;max-width:45rem}
ul.kept{list-style:none;padding-left:.2rem;margin:.6rem 0}
.note{color:var(--warn);background:var(--warn-paper);padding:.35rem .8rem;font-size:.92rem}
.warnings li{color:var(--warn)}
.failure{color:var(--warn);background:var(--warn-paper);border-left:3px solid var(--warn);padding:.6rem .9rem;margin:1rem 0}
.sources li{margin:.35rem 0}
footer{margin-top:2.5rem;padding-top:.6rem;border-top:1px solid var(--line);color:var(--faint);font-size:.85rem}
footer p{margin:.2rem 0}
@media print{@page{margin:18mm}body{font-size:10pt}main{max-width:none;padding:0}pre{white-space:pre-wrap}figure svg{min-width:0}pre.code{break-after:avoid;border-left-color:#999}
figure,table,.failure{break-inside:avoid}h2,h3{break-after:avoid}.table{overflow:visible}a{color:inherit}}
";

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn prose_runs_nothing_and_fetches_nothing() {
        let html = prose(
            "a <script>x()</script> ![p](http://a.b/c.png) [j](javascript:x) [ok](https://a.b)\n\n<img src=x>",
        );
        assert!(
            !html.contains("<script") && !html.contains("<img") && !html.contains("javascript:"),
            "{html}"
        );
        assert!(html.contains("href=\"https://a.b\""), "{html}");
    }

    #[test]
    fn tables_align_numbers_and_name_failures() {
        let made = Table::new([Column::texts("name", ["a", "b"]), Column::numbers("Ca [mg/L]", [1.5, 20.0])])
            .unwrap();
        let made = made.with_failures([None, Some("no <equilibrium>".to_owned())]).unwrap();
        let html = table(&made);
        assert!(
            html.contains("<td class=\"n\">1.5")
                && html.contains("no &lt;equilibrium&gt;")
                && html.contains("mg/L"),
            "{html}"
        );
    }
}
