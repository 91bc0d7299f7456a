//! Pages that the tools write: one file, readable offline, light and dark, with plots in it. What is on them is the
//! tools' own affair.

mod plot;

pub use plot::{Plot, PlotLine};

use std::fmt::Write as _;

/// A page being written.
#[derive(Clone, Debug)]
pub struct Page {
    html: String,
}

const STYLE: &str = "\
:root{color-scheme:light dark}\
body{font:15px/1.45 system-ui,sans-serif;max-width:70rem;margin:2rem auto;padding:0 1rem}\
h1{font-size:1.5rem}h2{font-size:1.1rem;margin-top:2rem}\
table{border-collapse:collapse;width:100%;font-variant-numeric:tabular-nums}\
th,td{text-align:left;padding:.25rem .6rem;border-bottom:1px solid #8884;vertical-align:top}\
td.n,th.n{text-align:right;white-space:nowrap}\
.ok{color:#1a7f37}.miss{color:#cf222e;font-weight:600}.none{color:#888}\
figure{margin:1rem 0;overflow-x:auto}svg{background:#fff;max-width:100%;height:auto}\
p.small{color:#888;font-size:.9em}";

impl Page {
    /// A page with this heading.
    #[must_use]
    pub fn new(title: &str) -> Self {
        let title = escape(title);
        Self {
            html: format!(
                "<!doctype html>\n<html lang=\"en\"><head><meta charset=\"utf-8\"><meta name=\"viewport\" \
                 content=\"width=device-width\"><title>{title}</title><style>{STYLE}</style></head><body>\n<h1>{title}</h1>\n"
            ),
        }
    }

    /// A heading below it.
    pub fn heading(&mut self, text: &str) {
        self.add(format_args!("<h2>{}</h2>\n", escape(text)));
    }

    /// A paragraph.
    pub fn paragraph(&mut self, text: &str) {
        self.add(format_args!("<p>{}</p>\n", escape(text)));
    }

    /// A paragraph in small print.
    pub fn small(&mut self, text: &str) {
        self.add(format_args!("<p class=\"small\">{}</p>\n", escape(text)));
    }

    /// A table: headings, and rows of cells each with its class (`n` for numbers, `ok`, `miss`, `none`, or nothing).
    pub fn table(&mut self, headings: &[&str], rows: &[Vec<(String, &str)>]) {
        let head: String = headings.iter().map(|it| format!("<th>{}</th>", escape(it))).collect();
        self.add(format_args!("<table><thead><tr>{head}</tr></thead><tbody>\n"));
        for row in rows {
            let cells: String = row
                .iter()
                .map(|(text, class)| format!("<td class=\"{class}\">{}</td>", escape(text)))
                .collect();
            self.add(format_args!("<tr>{cells}</tr>\n"));
        }
        self.html += "</tbody></table>\n";
    }

    /// A plot.
    pub fn plot(&mut self, plot: &Plot<'_>) {
        self.add(format_args!("<figure>{}</figure>\n", plot.svg()));
    }

    /// The whole page.
    #[must_use]
    pub fn finish(mut self) -> String {
        self.html += "</body></html>\n";
        self.html
    }

    fn add(&mut self, what: core::fmt::Arguments<'_>) {
        // Writing to a String cannot fail.
        let _ = self.html.write_fmt(what);
    }
}

/// Text as it may stand in HTML.
#[must_use]
pub fn escape(text: &str) -> String {
    text.chars().fold(String::with_capacity(text.len()), |mut out, it| {
        match it {
            '&' => out += "&amp;",
            '<' => out += "&lt;",
            '>' => out += "&gt;",
            '"' => out += "&quot;",
            it => out.push(it),
        }
        out
    })
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_out_of_a_configuration_stay_text() {
        let mut page = Page::new("<script>alert(1)</script>");
        page.table(&["a"], &[vec![("\"><img>".into(), "n")]]);
        let html = page.finish();
        assert!(!html.contains("<script>") && !html.contains("<img>"), "{html}");
        assert!(html.contains("&quot;&gt;&lt;img&gt;"));
    }
}
