//! Takes values out of the spanned tree, checks each against its row of the table of keys, and collects what is wrong.

use std::cell::{Cell, RefCell};
use std::ops::Range;

use toml::Spanned;
use toml::de::{DeTable, DeValue};

use super::Mistake;
use super::keys::{self, Kind, TABLES};

/// Nobody reads more mistakes than this in one go; a file of something else has one in every line.
const MOST: usize = 100;

/// Where mistakes gather while a file is read.
pub(super) struct Notes<'a> {
    pub(super) file: &'a str,
    pub(super) text: &'a str,
    pub(super) mistakes: RefCell<Vec<Mistake>>,
    /// Mistakes beyond [`MOST`]: only counted.
    more: Cell<usize>,
    pub(super) warnings: RefCell<Vec<Mistake>>,
}

impl<'a> Notes<'a> {
    pub(super) fn new(file: &'a str, text: &'a str) -> Self {
        Self { file, text, mistakes: RefCell::default(), more: Cell::new(0), warnings: RefCell::default() }
    }

    pub(super) fn wrong(&self, span: &Range<usize>, what: impl Into<String>) {
        let mut mistakes = self.mistakes.borrow_mut();
        if mistakes.len() < MOST {
            mistakes.push(Mistake::at(self.file, self.text, span, what.into()));
        } else {
            self.more.set(self.more.get() + 1);
        }
    }

    /// All of them, in the order of the file.
    pub(super) fn in_order(&self) -> Vec<Mistake> {
        let mut mistakes = self.mistakes.take();
        mistakes.sort_by_key(|it| (it.line, it.column));
        mistakes.dedup();
        if let (1.., Some(last)) = (self.more.get(), mistakes.last_mut()) {
            last.what += &format!(" (and {} more mistakes; mend these first)", self.more.get());
        }
        mistakes
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
#[derive(Clone)]
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

    /// Where a key's value stands; the table's header where it was left out.
    pub(super) fn at(&self, name: &str) -> Range<usize> {
        self.find(name).map_or_else(|| self.span.clone(), |(_, span)| span)
    }

    /// Whether a key is written, and does not go by its default.
    pub(super) fn given(&self, name: &str) -> bool {
        self.find(name).is_some()
    }

    /// As it is written in a file.
    fn header(&self) -> String {
        keys::header(self.name)
    }

    fn find(&self, name: &str) -> Option<(&'a DeValue<'a>, Range<usize>)> {
        let (_, value) = self.table?.iter().find(|(key, _)| key.get_ref() == name)?;
        Some((value.get_ref(), value.span()))
    }

    fn refuse_unknown(&self) {
        for (key, _) in self.table.into_iter().flat_map(|it| it.iter()) {
            if keys::find(self.name, key.get_ref()).is_none() {
                let known: Vec<&str> =
                    keys::KEYS.iter().filter(|it| it.table == self.name).map(|it| it.name).collect();
                let hint = nearest(key.get_ref(), &known)
                    .map_or_else(String::new, |it| format!("; did you mean `{it}`?"));
                let all = if known.is_empty() { "there are none yet".into() } else { known.join(", ") };
                let read = printable(key.get_ref());
                self.notes.wrong(
                    &key.span(),
                    format!("`{read}` is no key of {}{hint} (known: {all})", self.header()),
                );
            }
        }
    }

    /// The value of a key, or `None` where it was left out; a key that must be given is then a mistake.
    fn value(&self, name: &str) -> Option<(&'a DeValue<'a>, Range<usize>)> {
        let found = self.find(name);
        if found.is_none() && keys::find(self.name, name).is_some_and(|it| it.default.is_none()) {
            self.notes.wrong(&self.span, format!("{} lacks `{name}`: {}", self.header(), self.needs(name)));
        }
        found
    }

    /// What a key needs, in words.
    fn needs(&self, name: &str) -> String {
        keys::find(self.name, name).map_or_else(String::new, |it| {
            let unit = if it.unit.is_empty() { String::new() } else { format!(" {}", it.unit) };
            let range = match it.kind {
                Kind::Button => format!("one of {}", keys::BUTTONS.join(", ")),
                Kind::Axis => format!("one of {}, or that with \"-\" before it", keys::AXES.join(", ")),
                Kind::Number(..)
                | Kind::Whole(..)
                | Kind::Pair(..)
                | Kind::Text(_)
                | Kind::Flag
                | Kind::Word(_) => it.kind.range(),
            };
            format!("{range}{unit} ({})", it.help)
        })
    }

    /// What was read, why it cannot be, what would do.
    fn refuse(&self, name: &str, span: &Range<usize>, why: &str) {
        let read = self.notes.text.get(span.clone()).unwrap_or("").lines().next().unwrap_or("");
        let shown = printable(read.get(..60).unwrap_or(read));
        self.notes.wrong(span, format!("`{name}` cannot be {shown}: {why}; it must be {}", self.needs(name)));
    }

    fn default(&self, name: &str) -> &'static str {
        keys::find(self.name, name).and_then(|it| it.default).unwrap_or("")
    }

    fn kind(&self, name: &str) -> Option<Kind> {
        keys::find(self.name, name).map(|it| it.kind)
    }

    /// A number; `None` when it is wrong, or left out without a default.
    pub(super) fn number(&self, name: &str) -> Option<At<f64>> {
        let Some((value, span)) = self.value(name) else {
            return self.default(name).parse().ok().map(|value| At { value, span: self.span.clone() });
        };
        let Some(Kind::Number(least, most)) = self.kind(name) else { return None };
        match number(value).and_then(|it| within(it, least, most)) {
            Ok(value) => Some(At { value, span }),
            Err(why) => {
                let why = match keys::find(self.name, name) {
                    Some(key) if !key.why.is_empty() && number(value).is_ok() => key.why,
                    Some(_) | None => why,
                };
                self.refuse(name, &span, why);
                None
            }
        }
    }

    /// A whole number.
    pub(super) fn whole(&self, name: &str) -> Option<At<i64>> {
        let Some((value, span)) = self.value(name) else {
            return self.default(name).parse().ok().map(|value| At { value, span: self.span.clone() });
        };
        let Some(Kind::Whole(least, most)) = self.kind(name) else { return None };
        let read = match value.as_integer() {
            Some(it) => i64::from_str_radix(it.as_str(), it.radix()).map_err(|_| "it has too many digits"),
            None => Err(number(value).err().unwrap_or("it is not a whole number")),
        };
        let read = read.and_then(|it| match it {
            it if it < least => Err("it is too small"),
            it if it > most => Err("it is too large"),
            it => Ok(it),
        });
        match read {
            Ok(value) => Some(At { value, span }),
            Err(why) => {
                self.refuse(name, &span, why);
                None
            }
        }
    }

    /// Two numbers.
    pub(super) fn pair(&self, name: &str) -> Option<At<[f64; 2]>> {
        let (value, span) = self.value(name)?;
        let Some(Kind::Pair(least, most)) = self.kind(name) else { return None };
        let read = match value.as_array().map(|it| it.iter().collect::<Vec<_>>()).as_deref() {
            Some([a, b]) => {
                let one = |it: &Spanned<DeValue<'_>>| {
                    number(it.get_ref())
                        .and_then(|it| within(it, least, most))
                        .map_err(|why| (it.span(), why))
                };
                one(a).and_then(|a| Ok([a, one(b)?]))
            }
            Some(_) => Err((span.clone(), "it has not two entries")),
            None => Err((span.clone(), "it is no list [a, b]")),
        };
        match read {
            Ok(value) => Some(At { value, span }),
            Err((span, why)) => {
                self.refuse(name, &span, why);
                None
            }
        }
    }

    /// A text.
    pub(super) fn text(&self, name: &str) -> Option<At<String>> {
        let row = keys::find(self.name, name)?;
        let Some((value, span)) = self.value(name) else {
            return Some(At { value: row.default?.into(), span: self.span.clone() });
        };
        let Kind::Text(most) = row.kind else { return None };
        let why = match value.as_str() {
            None => "it is not a text in quotes",
            Some(it) if it.trim().is_empty() && row.default.is_none() => "it is empty",
            Some(it) if it.len() > most => "it is too long",
            Some(it) if it.chars().any(unprintable) => "it holds a character that cannot be printed",
            Some(it) => return Some(At { value: it.to_owned(), span }),
        };
        self.refuse(name, &span, why);
        None
    }

    /// true or false.
    pub(super) fn flag(&self, name: &str) -> Option<At<bool>> {
        let Some((value, span)) = self.value(name) else {
            return Some(At { value: self.default(name) == "true", span: self.span.clone() });
        };
        match value.as_bool() {
            Some(value) => Some(At { value, span }),
            None => {
                self.refuse(name, &span, "it is neither");
                None
            }
        }
    }

    /// One word of the key's list; gives its index in it.
    pub(super) fn word(&self, name: &str) -> Option<At<usize>> {
        let words = match self.kind(name)? {
            Kind::Word(words) => words,
            Kind::Button => keys::BUTTONS,
            Kind::Number(..) | Kind::Whole(..) | Kind::Pair(..) | Kind::Text(_) | Kind::Flag | Kind::Axis => {
                return None;
            }
        };
        self.one_of(name, words, |read, word| read == word)
    }

    /// An axis: index in [`keys::AXES`] and whether its sign is turned.
    pub(super) fn axis(&self, name: &str) -> Option<At<(usize, bool)>> {
        let turned = |read: &str| read.starts_with('-');
        let found =
            self.one_of(name, keys::AXES, |read, word| read.strip_prefix('-').unwrap_or(read) == word)?;
        let read = self.find(name).and_then(|it| it.0.as_str()).unwrap_or(self.default(name));
        Some(At { value: (found.value, turned(read)), span: found.span })
    }

    fn one_of(&self, name: &str, words: &[&str], is: impl Fn(&str, &str) -> bool) -> Option<At<usize>> {
        let (read, span) = match self.value(name) {
            None => (Some(self.default(name)), self.span.clone()),
            Some((value, span)) => (value.as_str(), span),
        };
        match read.and_then(|read| words.iter().position(|word| is(read, word))) {
            Some(value) => Some(At { value, span }),
            None => {
                let why = match read.map(|it| nearest(it.trim_start_matches('-'), words)) {
                    None => "it is not a word in quotes".to_owned(),
                    Some(None) => "it is not known".to_owned(),
                    Some(Some(near)) => format!("it is not known, perhaps \"{near}\" is meant"),
                };
                self.refuse(name, &span, &why);
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
                    printable(key.get_ref()),
                    known.join(", ")
                ),
            );
        }
    }
}

/// A finite number, written with or without a point; or why it is none.
fn number(value: &DeValue<'_>) -> Result<f64, &'static str> {
    let read: Option<f64> = match (value.as_float(), value.as_integer()) {
        (Some(it), _) => it.as_str().replace('_', "").parse().ok(),
        (None, Some(it)) if it.radix() == 10 => it.as_str().parse().ok(),
        (None, Some(it)) => i64::from_str_radix(it.as_str(), it.radix()).ok().map(|it| it as f64),
        (None, None) if value.is_str() => return Err("it is a text; take the quotes away"),
        (None, None) => return Err("it is not a number"),
    };
    match read {
        Some(it) if it.is_finite() => Ok(it),
        Some(it) if it.is_nan() => Err("that is not a number"),
        Some(_) => Err("that is not finite"),
        None => Err("it is not a number"),
    }
}

fn within(value: f64, least: f64, most: f64) -> Result<f64, &'static str> {
    match value {
        it if it < least => Err("it is too small"),
        it if it > most => Err("it is too large"),
        it => Ok(it),
    }
}

/// Characters that would not show, or would turn the text round them.
fn unprintable(it: char) -> bool {
    it.is_control()
        || matches!(it, '\u{200b}'..='\u{200f}' | '\u{2028}'..='\u{202e}' | '\u{2066}'..='\u{2069}' | '\u{feff}')
}

/// The same with a mark in place of each such character.
pub(super) fn printable(text: &str) -> String {
    text.chars().map(|it| if unprintable(it) { '\u{fffd}' } else { it }).collect()
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
