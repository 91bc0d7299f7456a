//! Takes values out of the spanned tree, checks each against its row of the table of keys, and collects what is wrong.

use std::cell::RefCell;
use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::Mistake;
use super::keys::{self, Kind, TABLES};

/// Where mistakes gather while a file is read.
pub(super) struct Notes<'a> {
    pub(super) file: &'a str,
    pub(super) text: &'a str,
    pub(super) mistakes: RefCell<Vec<Mistake>>,
    pub(super) warnings: RefCell<Vec<Mistake>>,
}

impl<'a> Notes<'a> {
    pub(super) fn new(file: &'a str, text: &'a str) -> Self {
        Self { file, text, mistakes: RefCell::default(), warnings: RefCell::default() }
    }

    pub(super) fn wrong(&self, span: &Range<usize>, what: impl Into<String>) {
        self.mistakes.borrow_mut().push(Mistake::at(self.file, self.text, span, what.into()));
    }

    pub(super) fn warn(&self, span: &Range<usize>, what: impl Into<String>) {
        self.warnings.borrow_mut().push(Mistake::at(self.file, self.text, span, what.into()));
    }
}

/// A value and where it stands (the table's header where it was left out).
#[derive(Clone, Debug)]
pub(super) struct At<T> {
    pub(super) value: T,
    pub(super) span: Range<usize>,
}

/// One table of the file.
pub(super) struct Section<'a> {
    notes: &'a Notes<'a>,
    name: &'static str,
    table: Option<&'a DeTable<'a>>,
    pub(super) span: Range<usize>,
}

impl<'a> Section<'a> {
    /// The single table of that name; one that is left out has only defaults.
    pub(super) fn single(notes: &'a Notes<'a>, root: &'a Spanned<DeTable<'a>>, name: &'static str) -> Self {
        let Some((key, value)) = root.get_ref().iter().find(|(key, _)| key.get_ref() == name) else {
            return Self { notes, name, table: None, span: 0..0 };
        };
        match value.get_ref().as_table() {
            Some(table) => {
                let it = Self { notes, name, table: Some(table), span: key.span() };
                it.refuse_unknown();
                it
            }
            None => {
                notes.wrong(&value.span(), format!("`{name}` must be one table, written [{name}]"));
                Self { notes, name, table: None, span: key.span() }
            }
        }
    }

    /// All tables of that name.
    pub(super) fn several(
        notes: &'a Notes<'a>,
        root: &'a Spanned<DeTable<'a>>,
        name: &'static str,
    ) -> Vec<Self> {
        let Some((key, value)) = root.get_ref().iter().find(|(key, _)| key.get_ref() == name) else {
            notes.wrong(&(0..0), format!("there is no [[{name}]] table; at least one is needed"));
            return Vec::new();
        };
        let Some(array) = value.get_ref().as_array() else {
            notes.wrong(&key.span(), format!("`{name}` must be a list of tables, each written [[{name}]]"));
            return Vec::new();
        };
        let mut all = Vec::new();
        for entry in array.iter() {
            match entry.get_ref().as_table() {
                Some(table) => {
                    let it = Self { notes, name, table: Some(table), span: entry.span() };
                    it.refuse_unknown();
                    all.push(it);
                }
                None => notes.wrong(
                    &entry.span(),
                    format!("an entry of `{name}` must be a table, written [[{name}]]"),
                ),
            }
        }
        all
    }

    fn refuse_unknown(&self) {
        for (key, _) in self.table.into_iter().flat_map(|it| it.iter()) {
            if keys::find(self.name, key.get_ref()).is_none() {
                let known: Vec<&str> =
                    keys::KEYS.iter().filter(|it| it.table == self.name).map(|it| it.name).collect();
                let hint = nearest(key.get_ref(), &known)
                    .map_or_else(String::new, |it| format!("; did you mean `{it}`?"));
                let all = if known.is_empty() { "there are none yet".into() } else { known.join(", ") };
                self.notes.wrong(
                    &key.span(),
                    format!("`{}` is no key of [{}]{hint} (known: {all})", key.get_ref(), self.name),
                );
            }
        }
    }

    /// The value of a key, or `None` where it was left out; a key that must be given is then a mistake.
    fn value(&self, name: &str) -> Option<(&'a DeValue<'a>, Range<usize>)> {
        let found = self.table.into_iter().flat_map(|it| it.iter()).find(|(key, _)| key.get_ref() == name);
        if found.is_none() && keys::find(self.name, name).is_some_and(|it| it.default.is_none()) {
            self.notes.wrong(&self.span, format!("[{}] lacks `{name}`: {}", self.name, self.needs(name)));
        }
        found.map(|(_, value)| (value.get_ref(), value.span()))
    }

    /// What a key needs, in words.
    fn needs(&self, name: &str) -> String {
        keys::find(self.name, name).map_or_else(String::new, |it| {
            let unit = if it.unit.is_empty() { String::new() } else { format!(" {}", it.unit) };
            format!("{}{unit} ({})", it.kind.range(), it.help)
        })
    }

    fn refuse(&self, name: &str, span: &Range<usize>) {
        let read = self.notes.text.get(span.clone()).unwrap_or("").lines().next().unwrap_or("");
        self.notes.wrong(span, format!("`{name}` cannot be {read}; it must be {}", self.needs(name)));
    }

    fn default(&self, name: &str) -> &'static str {
        keys::find(self.name, name).and_then(|it| it.default).unwrap_or("")
    }

    /// A number; `None` when it is wrong, or left out without a default.
    pub(super) fn number(&self, name: &str) -> Option<At<f64>> {
        let Some((value, span)) = self.value(name) else {
            return self.default(name).parse().ok().map(|value| At { value, span: self.span.clone() });
        };
        let read = number(value);
        let fits = match keys::find(self.name, name).map(|it| it.kind) {
            Some(Kind::Number(least, most)) => read.is_some_and(|it| it >= least && it <= most),
            Some(_) | None => false,
        };
        if !fits {
            self.refuse(name, &span);
        }
        read.filter(|_| fits).map(|value| At { value, span })
    }

    /// A whole number.
    pub(super) fn whole(&self, name: &str) -> Option<At<i64>> {
        let Some((value, span)) = self.value(name) else {
            return self.default(name).parse().ok().map(|value| At { value, span: self.span.clone() });
        };
        let read = value.as_integer().and_then(|it| i64::from_str_radix(it.as_str(), it.radix()).ok());
        let fits = match keys::find(self.name, name).map(|it| it.kind) {
            Some(Kind::Whole(least, most)) => read.is_some_and(|it| it >= least && it <= most),
            Some(_) | None => false,
        };
        if !fits {
            self.refuse(name, &span);
        }
        read.filter(|_| fits).map(|value| At { value, span })
    }

    /// Two numbers.
    pub(super) fn pair(&self, name: &str) -> Option<At<[f64; 2]>> {
        let (value, span) = self.value(name)?;
        let read: Option<Vec<f64>> =
            value.as_array().map(|it| it.iter().filter_map(|it| number(it.get_ref())).collect());
        let fits = match keys::find(self.name, name).map(|it| it.kind) {
            Some(Kind::Pair(least, most)) => read.as_ref().is_some_and(|it| {
                it.len() == 2
                    && value.as_array().is_some_and(|all| all.len() == 2)
                    && it.iter().all(|it| *it >= least && *it <= most)
            }),
            Some(_) | None => false,
        };
        match read.as_deref() {
            Some([a, b]) if fits => Some(At { value: [*a, *b], span }),
            Some(_) | None => {
                self.refuse(name, &span);
                None
            }
        }
    }

    /// A text.
    pub(super) fn text(&self, name: &str) -> Option<At<String>> {
        let Some((value, span)) = self.value(name) else {
            let default = keys::find(self.name, name)?.default?;
            return Some(At { value: default.into(), span: self.span.clone() });
        };
        let row = keys::find(self.name, name);
        let most = match row.map(|it| it.kind) {
            Some(Kind::Text(most)) => most,
            Some(_) | None => 0,
        };
        let may_be_empty = row.is_some_and(|it| it.default.is_some());
        match value.as_str() {
            Some(it)
                if it.len() <= most
                    && (may_be_empty || !it.trim().is_empty())
                    && !it.contains(['\n', '\0']) =>
            {
                Some(At { value: it.to_owned(), span })
            }
            Some(_) | None => {
                self.refuse(name, &span);
                None
            }
        }
    }

    /// true or false.
    pub(super) fn flag(&self, name: &str) -> Option<At<bool>> {
        let Some((value, span)) = self.value(name) else {
            return Some(At { value: self.default(name) == "true", span: self.span.clone() });
        };
        match value.as_bool() {
            Some(value) => Some(At { value, span }),
            None => {
                self.refuse(name, &span);
                None
            }
        }
    }

    /// One word of a list; gives its index in it.
    pub(super) fn word(&self, name: &str, words: &[&str]) -> Option<At<usize>> {
        let (read, span) = match self.value(name) {
            None => (Some(self.default(name)), self.span.clone()),
            Some((value, span)) => (value.as_str(), span),
        };
        match read.and_then(|read| words.iter().position(|it| *it == read)) {
            Some(value) => Some(At { value, span }),
            None => {
                let hint = read
                    .and_then(|it| nearest(it, words))
                    .map_or_else(String::new, |it| format!("; did you mean \"{it}\"?"));
                let read = read.unwrap_or("what is written");
                self.notes.wrong(
                    &span,
                    format!("`{name}` cannot be \"{read}\"; it must be {}{hint}", self.needs(name)),
                );
                None
            }
        }
    }

    /// An axis: index in [`keys::AXES`] and whether its sign is turned.
    pub(super) fn axis(&self, name: &str) -> Option<At<(usize, bool)>> {
        let (read, span) = match self.value(name) {
            None => (Some(self.default(name)), self.span.clone()),
            Some((value, span)) => (value.as_str(), span),
        };
        let read = read.unwrap_or("");
        let bare = read.strip_prefix('-').unwrap_or(read);
        match keys::AXES.iter().position(|it| *it == bare) {
            Some(at) => Some(At { value: (at, bare.len() != read.len()), span }),
            None => {
                self.notes.wrong(
                    &span,
                    format!(
                        "`{name}` cannot be \"{read}\"; it must be one of {}, or that with \"-\" before it",
                        keys::AXES.join(", ")
                    ),
                );
                None
            }
        }
    }
}

/// Tables that are not known.
pub(super) fn refuse_unknown_tables(notes: &Notes<'_>, root: &Spanned<DeTable<'_>>) {
    let known: Vec<&str> = TABLES.iter().map(|it| it.0).collect();
    for (key, _) in root.get_ref().iter() {
        if !known.contains(&key.get_ref().as_ref()) {
            let hint = nearest(key.get_ref(), &known)
                .map_or_else(String::new, |it| format!("; did you mean `{it}`?"));
            notes.wrong(
                &key.span(),
                format!(
                    "`{}` is no table of a configuration{hint} (known: {})",
                    key.get_ref(),
                    known.join(", ")
                ),
            );
        }
    }
}

/// A finite number, written with or without a point.
fn number(value: &DeValue<'_>) -> Option<f64> {
    let read: f64 = match (value.as_float(), value.as_integer()) {
        (Some(it), _) => it.as_str().replace('_', "").parse().ok()?,
        (None, Some(it)) if it.radix() == 10 => it.as_str().parse().ok()?,
        (None, _) => return None,
    };
    read.is_finite().then_some(read)
}

/// The known word that a misspelt one is nearest to, if it is near at all (Levenshtein distance).
fn nearest<'a>(word: &str, known: &[&'a str]) -> Option<&'a str> {
    let best = known.iter().map(|it| (distance(word, it), *it)).min()?;
    (best.0 <= 1 + word.len() / 3).then_some(best.1)
}

fn distance(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, x) in a.chars().enumerate() {
        let mut diagonal = std::mem::replace(&mut row[0], i + 1);
        for (j, y) in b.iter().enumerate() {
            let cost = (diagonal + usize::from(x != *y)).min(row[j] + 1).min(row[j + 1] + 1);
            diagonal = std::mem::replace(&mut row[j + 1], cost);
        }
    }
    row.last().copied().unwrap_or(0)
}
