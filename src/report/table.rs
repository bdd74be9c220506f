//! A table, and its three faces: aligned text, Markdown, HTML.

use super::words::Words;
use maud::{Markup, html};

/// Which side the cells of a column lean on.
#[derive(Debug, Clone, Copy, PartialEq, Eq)]
pub enum Lean {
    /// Text.
    Left,
    /// Numbers.
    Right,
}

/// A table with a head.
#[derive(Debug, Clone, PartialEq)]
pub struct Table {
    head: Vec<(Words, Lean)>,
    rows: Vec<Vec<Words>>,
}

impl Table {
    /// A table with these columns and no rows yet.
    pub fn new(head: &[(&str, Lean)]) -> Self {
        Table {
            head: head.iter().map(|(t, l)| (Words::from(*t), *l)).collect(),
            rows: Vec::new(),
        }
    }

    /// Adds a row; it has as many cells as there are columns.
    pub fn row(&mut self, cells: Vec<Words>) {
        debug_assert_eq!(cells.len(), self.head.len());
        self.rows.push(cells);
    }

    /// Leaves out the columns in which every cell is empty.
    pub fn without_empty_columns(mut self) -> Self {
        let filled: Vec<bool> = (0..self.head.len())
            .map(|c| self.rows.iter().any(|r| !r[c].plain.is_empty()))
            .collect();
        let keep = |c: usize| filled.get(c).copied().unwrap_or(true);
        self.head = pick(self.head, keep);
        self.rows = self.rows.into_iter().map(|r| pick(r, keep)).collect();
        self
    }

    /// For a terminal: columns two blanks apart, a rule under the head, no trailing blanks.
    pub fn text(&self) -> String {
        let width = |c: usize| {
            let cells = self.rows.iter().map(|r| &r[c]);
            let cells = cells.chain(std::iter::once(&self.head[c].0));
            cells.map(|w| w.plain.chars().count()).max().unwrap_or(0)
        };
        let widths: Vec<usize> = (0..self.head.len()).map(width).collect();
        let mut out = String::new();
        let mut line = |cells: &mut dyn Iterator<Item = &str>| {
            let mut text = String::new();
            for (c, cell) in cells.enumerate() {
                if c > 0 {
                    text.push_str("  ");
                }
                let blanks = " ".repeat(widths[c].saturating_sub(cell.chars().count()));
                match self.head[c].1 {
                    Lean::Left => text.extend([cell, &blanks]),
                    Lean::Right => text.extend([blanks.as_str(), cell]),
                }
            }
            out.push_str(text.trim_end());
            out.push('\n');
        };
        line(&mut self.head.iter().map(|(w, _)| w.plain.as_str()));
        let rules: Vec<String> = widths.iter().map(|w| "─".repeat(*w)).collect();
        line(&mut rules.iter().map(String::as_str));
        for row in &self.rows {
            line(&mut row.iter().map(|w| w.plain.as_str()));
        }
        out
    }

    /// As Markdown; bars in cells are escaped.
    pub fn markdown(&self) -> String {
        let line = |cells: &mut dyn Iterator<Item = String>| {
            let cells: Vec<String> = cells.collect();
            format!("| {} |\n", cells.join(" | "))
        };
        let mut out = line(&mut self.head.iter().map(|(w, _)| escaped(&w.plain)));
        let rule = |lean: &Lean| match lean {
            Lean::Left => ":---".to_owned(),
            Lean::Right => "---:".to_owned(),
        };
        out.push_str(&line(&mut self.head.iter().map(|(_, l)| rule(l))));
        for row in &self.rows {
            out.push_str(&line(&mut row.iter().map(|w| escaped(&w.plain))));
        }
        out
    }

    /// As HTML.
    pub fn html(&self) -> Markup {
        let class = |lean: Lean| match lean {
            Lean::Left => "text",
            Lean::Right => "number",
        };
        html! {
            div.wide {
                table {
                    thead { tr {
                        @for (words, lean) in &self.head {
                            th scope="col" class=(class(*lean)) { (words.html()) }
                        }
                    } }
                    tbody {
                        @for row in &self.rows {
                            tr {
                                @for (cell, (_, lean)) in row.iter().zip(&self.head) {
                                    td class=(class(*lean)) { (cell.html()) }
                                }
                            }
                        }
                    }
                }
            }
        }
    }
}

fn pick<T>(items: Vec<T>, keep: impl Fn(usize) -> bool) -> Vec<T> {
    let numbered = items.into_iter().enumerate();
    numbered.filter(|(c, _)| keep(*c)).map(|(_, t)| t).collect()
}

/// Text in which nothing acts as Markdown's own marks.
pub fn escaped(text: &str) -> String {
    let mut out = String::with_capacity(text.len());
    for c in text.chars() {
        if matches!(c, '|' | '*' | '_' | '`' | '<' | '\\' | '[' | ']') {
            out.push('\\');
        }
        out.push(if c.is_control() { ' ' } else { c });
    }
    out
}

#[cfg(test)]
mod tests {
    use super::*;

    fn table() -> Table {
        let mut table = Table::new(&[
            ("Band", Lean::Right),
            ("State", Lean::Left),
            ("x", Lean::Left),
        ]);
        table.row(vec![
            "1".into(),
            super::super::words::orbital("2b1"),
            "".into(),
        ]);
        table.row(vec!["12".into(), "a|b".into(), "".into()]);
        table
    }

    #[test]
    fn three_faces() {
        let table = table().without_empty_columns();
        assert_eq!(
            table.text(),
            "Band  State\n────  ─────\n   1  2b1\n  12  a|b\n"
        );
        assert_eq!(
            table.markdown(),
            "| Band | State |\n| ---: | :--- |\n| 1 | 2b1 |\n| 12 | a\\|b |\n"
        );
        let html = table.html().into_string();
        assert!(
            html.contains("<td class=\"text\">2b<sub>1</sub></td>"),
            "{html}"
        );
    }
}
