//! A page of blocks, and its two forms: Markdown, and one HTML file with its drawings inside.

use std::fmt::Write as _;

use crate::picture::{Drawing, escaped};

/// A page.
#[derive(Debug, Clone, Default)]
pub struct Page {
    /// Heading of all.
    pub title: String,
    /// From top to bottom.
    pub blocks: Vec<Block>,
}

/// A part of a page.
#[derive(Debug, Clone)]
pub enum Block {
    /// A heading.
    Heading(String),
    /// A paragraph.
    Text(String),
    /// A paragraph that must not be overlooked.
    Warning(String),
    /// Sentences one below the other.
    List(Vec<String>),
    /// A step with its number, a box to tick and what is to be seen.
    Step(String, Vec<String>),
    /// Header and rows.
    Table(Vec<String>, Vec<Vec<String>>),
    /// A drawing and the command that makes it.
    Figure(Drawing, String),
    /// Words as they are.
    Verbatim(String),
}

impl Page {
    /// Adds a heading.
    pub fn heading(&mut self, text: &str) {
        self.blocks.push(Block::Heading(text.into()));
    }

    /// Adds a paragraph.
    pub fn text(&mut self, text: impl Into<String>) {
        self.blocks.push(Block::Text(text.into()));
    }

    /// Adds a step; its numbers run through the page.
    pub fn step(&mut self, text: impl Into<String>, see: Vec<String>) {
        self.blocks.push(Block::Step(text.into(), see));
    }

    /// Adds a table.
    pub fn table(&mut self, header: &[&str], rows: Vec<Vec<String>>) {
        if !rows.is_empty() {
            self.blocks.push(Block::Table(header.iter().map(|h| (*h).into()).collect(), rows));
        }
    }

    /// As Markdown; drawings are named by the command that makes them.
    #[must_use]
    pub fn markdown(&self) -> String {
        let mut out = format!("# {}\n\n", self.title);
        let mut step = 0;
        for block in &self.blocks {
            match block {
                Block::Heading(text) => {
                    let _ = writeln!(out, "## {text}\n");
                }
                Block::Text(text) => {
                    let _ = writeln!(out, "{text}\n");
                }
                Block::Warning(text) => {
                    let _ = writeln!(out, "> **Caution.** {text}\n");
                }
                Block::List(items) => bullets(&mut out, items, ""),
                Block::Step(text, see) => {
                    step += 1;
                    let _ = writeln!(out, "{step}. [ ] {text}");
                    bullets(&mut out, see, "   ");
                }
                Block::Table(header, rows) => {
                    let cell = |text: &String| text.replace('|', "\\|");
                    let line = |cells: &[String]| {
                        format!("| {} |\n", cells.iter().map(cell).collect::<Vec<_>>().join(" | "))
                    };
                    out.push_str(&line(header));
                    out.push_str(&format!("|{}\n", "---|".repeat(header.len())));
                    rows.iter().for_each(|row| out.push_str(&line(row)));
                    out.push('\n');
                }
                Block::Figure(_, command) => {
                    let line = format!("Drawing: `{command}` ");
                    // drawings of several crystals come of one command
                    if !out.contains(&line) {
                        let _ = writeln!(
                            out,
                            "{line}(it stands in the HTML form of this sheet; job.toml is the job at its end)\n"
                        );
                    }
                }
                Block::Verbatim(text) => {
                    let _ = writeln!(out, "```toml\n{}\n```\n", text.trim_end());
                }
            }
        }
        out
    }

    /// As one HTML file that needs nothing else; prints on A4 and Letter.
    #[must_use]
    pub fn html(&self) -> String {
        let title = escaped(&self.title);
        let mut out = format!(
            "<!DOCTYPE html>\n<html lang=\"en\">\n<head>\n<meta charset=\"utf-8\">\n<meta name=\"viewport\" \
             content=\"width=device-width, initial-scale=1\">\n<title>{title}</title>\n<link rel=\"icon\" \
             href=\"data:,\">\n<style>\n{STYLE}</style>\n</head>\n<body>\n<main>\n<h1>{title}</h1>\n"
        );
        let mut step = 0;
        for block in &self.blocks {
            block_html(&mut out, block, &mut step);
        }
        out.push_str("</main>\n</body>\n</html>\n");
        out
    }
}

/// A sentence in HTML; what stands between backticks is code.
fn inline(text: &str) -> String {
    let parts = text.split('`').map(escaped);
    parts
        .enumerate()
        .map(|(n, part)| if n % 2 == 1 { format!("<code>{part}</code>") } else { part })
        .collect()
}

fn bullets(out: &mut String, items: &[String], indent: &str) {
    for item in items {
        let _ = writeln!(out, "{indent}- {item}");
    }
    out.push('\n');
}

fn block_html(out: &mut String, block: &Block, step: &mut usize) {
    let items = |all: &[String]| all.iter().map(|i| format!("<li>{}</li>\n", inline(i))).collect::<String>();
    let _ = match block {
        Block::Heading(text) => writeln!(out, "<h2>{}</h2>", inline(text)),
        Block::Text(text) => writeln!(out, "<p>{}</p>", inline(text)),
        Block::Warning(text) => {
            writeln!(out, "<p class=\"caution\"><strong>Caution.</strong> {}</p>", inline(text))
        }
        Block::List(all) => writeln!(out, "<ul>\n{}</ul>", items(all)),
        Block::Step(text, see) => {
            *step += 1;
            let see = if see.is_empty() { String::new() } else { format!("\n<ul>\n{}</ul>", items(see)) };
            writeln!(
                out,
                "<div class=\"step\"><span class=\"box\" aria-hidden=\"true\"></span><div><strong>{step}.</strong> {}{see}</div></div>",
                inline(text)
            )
        }
        Block::Table(header, rows) => writeln!(out, "{}", table_html(header, rows)),
        Block::Figure(drawing, _) => writeln!(out, "<figure>\n{}</figure>", drawing.element()),
        Block::Verbatim(text) => writeln!(out, "<pre>{}</pre>", escaped(text.trim_end())),
    };
}

/// Each cell also carries its column's name, which a narrow page shows instead of the header.
fn table_html(header: &[String], rows: &[Vec<String>]) -> String {
    let mut out = String::from("<table>\n<thead><tr>");
    header.iter().for_each(|h| {
        let _ = write!(out, "<th scope=\"col\">{}</th>", escaped(h));
    });
    out.push_str("</tr></thead>\n<tbody>\n");
    for row in rows {
        out.push_str("<tr>");
        for (name, cell) in header.iter().zip(row) {
            let _ = write!(out, "<td data-name=\"{}\">{}</td>", escaped(name), escaped(cell));
        }
        out.push_str("</tr>\n");
    }
    out.push_str("</tbody>\n</table>");
    out
}

const STYLE: &str = "\
:root { color-scheme: light; }
body { margin: 0; background: #fff; color: #000; font: 15px/1.45 sans-serif; }
main { max-width: 60rem; margin: 0 auto; padding: 1rem; overflow-wrap: break-word; }
h1 { font-size: 1.5rem; margin: 0 0 .6rem; }
h2 { font-size: 1.15rem; margin: 1.4rem 0 .4rem; border-bottom: 1px solid #000; break-after: avoid; }
p, ul { margin: .4rem 0; }
ul { padding-left: 1.2rem; }
table { border-collapse: collapse; width: 100%; margin: .6rem 0; font-size: .92em; }
th, td { border: 1px solid #777; padding: .2rem .4rem; text-align: left; vertical-align: top; }
th { background: #eee; }
tr, .step, figure, .caution { break-inside: avoid; }
p:has(+ table) { break-after: avoid; }
.caution { border: 2px solid #000; padding: .5rem .7rem; }
.step { display: flex; gap: .6rem; margin: .5rem 0; }
.step > div { flex: 1; min-width: 0; }
.box { flex: none; width: .85rem; height: .85rem; border: 1.5px solid #000; margin-top: .2rem; }
figure { margin: .8rem 0; }
figure svg { max-width: 100%; height: auto; display: block; }
code, pre { overflow-wrap: anywhere; }
pre { font-size: .8em; white-space: pre-wrap; border: 1px solid #777; padding: .5rem; }
@media (max-width: 640px) {
  figure { overflow-x: auto; }
  figure svg { max-width: none; width: 640px; }
  thead { display: none; }
  tr { display: block; border: 1px solid #777; margin: .5rem 0; }
  td { display: block; border: 0; border-bottom: 1px solid #ddd; }
  td::before { content: attr(data-name) \": \"; font-weight: bold; }
}
@media print { @page { margin: 15mm; } body { font-size: 10pt; } main { max-width: none; padding: 0; } }
";
