//! A cursor over a TOML table that collects every problem instead of stopping at the first.
//!
//! Each key that is asked for becomes a known one; when a table is done with, the keys nobody asked for are errors that name the nearest known
//! key. A missing or misshapen value is told and comes back as `None`, so that reading goes on.

use super::problem::{Kind, Place, Problem, Severity, Source};
use std::borrow::Cow;
use std::cell::{Cell, RefCell};
use std::ops::Range;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// Longest name or title, characters.
const LONGEST_TEXT: usize = 200;

/// Problems of one source, as they are found.
pub struct Problems<'s> {
    source: &'s Source,
    list: RefCell<Vec<Problem>>,
}

/// A value and where it stands.
#[derive(Clone, Debug)]
pub struct Item<T> {
    /// The value.
    pub value: T,
    /// Its bytes.
    pub span: Range<usize>,
}

impl<'s> Problems<'s> {
    /// None yet.
    pub fn of(source: &'s Source) -> Self {
        Self { source, list: RefCell::default() }
    }

    /// Something is wrong at `span`.
    pub fn error(&self, span: &Range<usize>, what: impl Into<String>, hint: impl Into<String>) {
        self.add(Severity::Error, span, what.into(), hint.into());
    }

    /// Something should be looked at.
    pub fn warn(&self, span: &Range<usize>, what: impl Into<String>, hint: impl Into<String>) {
        self.add(Severity::Warning, span, what.into(), hint.into());
    }

    fn add(&self, severity: Severity, span: &Range<usize>, what: String, hint: String) {
        let place = Place::of(self.source, span.start);
        self.list.borrow_mut().push(Problem { place, severity, what, hint: Some(hint).filter(|h| !h.is_empty()) });
    }

    /// `file:line` of a span, for a second place in a message.
    pub fn line(&self, span: &Range<usize>) -> String {
        let place = Place::of(self.source, span.start);
        format!("{}:{}", place.file, place.line)
    }

    /// All of them, in the order of the file.
    pub fn into_list(self) -> Vec<Problem> {
        let mut list = self.list.into_inner();
        list.sort_by(|a, b| a.place.cmp(&b.place));
        list
    }

    /// Parses the source and reads it by `read`, which gets the top table.
    pub fn read<T>(&self, kind: Kind, read: impl FnOnce(&Table<'_, '_>) -> Option<T>) -> Option<T> {
        let (table, errors) = DeTable::parse_recoverable(&self.source.text);
        for error in &errors {
            let span = error.span().unwrap_or(0..0);
            self.error(&span, format!("TOML: {}", error.message()), "");
        }
        if !errors.is_empty() {
            return None;
        }
        let top = Table::new(self, table.get_ref(), 0..0, "the file");
        top.is(kind);
        read(&top)
    }
}

/// One table, and which of its keys are known.
pub struct Table<'p, 't> {
    /// Where problems go.
    pub problems: &'p Problems<'p>,
    table: &'t DeTable<'t>,
    /// Where the table begins.
    pub span: Range<usize>,
    name: String,
    known: RefCell<Vec<&'static str>>,
    /// Its keys are names, or not all are asked for: none is unknown.
    names: Cell<bool>,
}

impl Drop for Table<'_, '_> {
    /// The keys that nobody asked for are unknown.
    fn drop(&mut self) {
        if self.names.get() {
            return;
        }
        let known = self.known.borrow();
        for (key, _) in self.table.iter().filter(|(key, _)| !known.contains(&key.get_ref().as_ref())) {
            let word = key.get_ref().as_ref();
            let nearest =
                known.iter().min_by_key(|k| distance(word, k)).filter(|k| distance(word, k) <= 3.max(word.len() / 2));
            let hint = match nearest {
                Some(nearest) => format!("did you mean `{nearest}`?"),
                None => format!("known here: {}", known.join(", ")),
            };
            self.problems.error(&key.span(), format!("unknown key `{}` in {}", shown(word), self.name), hint);
        }
    }
}

impl<'p, 't> Table<'p, 't> {
    fn new(problems: &'p Problems<'p>, table: &'t DeTable<'t>, span: Range<usize>, name: &str) -> Self {
        Self { problems, table, span, name: name.to_string(), known: RefCell::default(), names: Cell::new(false) }
    }

    fn is(&self, kind: Kind) {
        let Some(word) = self.need_text("steadytap") else { return };
        if word.value != kind.words() {
            let what = format!("this is `{}` where `{}` is wanted", shown(&word.value), kind.words());
            self.problems.error(&word.span, what, format!("the file must say steadytap = \"{}\"", kind.words()));
        }
    }

    fn get(&self, key: &'static str) -> Option<&'t Spanned<DeValue<'t>>> {
        self.known.borrow_mut().push(key);
        self.table.get(key)
    }

    /// Whether a key stands here.
    pub fn has(&self, key: &str) -> bool {
        self.table.contains_key(key)
    }

    /// Where the value of a key stands; the table's own place without it.
    pub fn span_of(&self, key: &str) -> Range<usize> {
        self.table.get(key).map_or(self.span.clone(), Spanned::span)
    }

    /// Whoever reads this table now does not ask for all of its keys.
    pub fn all_known(&self) {
        self.names.set(true);
    }

    /// The key is known here and read elsewhere.
    pub fn know(&self, key: &'static str) {
        self.known.borrow_mut().push(key);
    }

    fn missing(&self, key: &'static str, example: &str) {
        let hint = if example.is_empty() { format!("add `{key} = …`") } else { format!("add `{key} = {example}`") };
        self.problems.error(&self.span, format!("{} has no `{key}`", self.name), hint);
    }

    fn wrong(&self, value: &Spanned<DeValue<'_>>, key: &str, need: &str) {
        let what = format!("`{key}` is {} where {need} is wanted", with_article(value.get_ref().type_str()));
        self.problems.error(&value.span(), what, "");
    }

    /// A string that is fit to be shown: no control, bidirectional or zero-width characters.
    pub fn text(&self, key: &'static str) -> Option<Item<String>> {
        let value = self.get(key)?;
        let Some(text) = value.get_ref().as_str() else {
            self.wrong(value, key, "a text in quotes");
            return None;
        };
        if text.chars().count() > LONGEST_TEXT || text.chars().any(unprintable) {
            let what = format!("`{key}` holds characters that cannot be shown, or more than {LONGEST_TEXT}");
            self.problems.error(&value.span(), what, "write it in plain letters");
            return None;
        }
        Some(Item { value: text.to_string(), span: value.span() })
    }

    /// A string that must be there.
    pub fn need_text(&self, key: &'static str) -> Option<Item<String>> {
        if !self.table.contains_key(key) {
            self.missing(key, "\"…\"");
        }
        self.text(key).filter(|item| {
            let empty = item.value.trim().is_empty();
            if empty {
                self.problems.error(&item.span, format!("`{key}` is empty"), "");
            }
            !empty
        })
    }

    /// A name: letters, digits, `-`, `_` and `.`, at most 64.
    pub fn need_name(&self, key: &'static str) -> Option<Item<String>> {
        self.need_text(key).filter(|item| self.is_name(item))
    }

    fn is_name(&self, item: &Item<String>) -> bool {
        let good =
            item.value.len() <= 64 && item.value.chars().all(|c| c.is_alphanumeric() || matches!(c, '-' | '_' | '.'));
        if !good {
            let what = format!("`{}` is no name", shown(&item.value));
            self.problems.error(&item.span, what, "use letters, digits, - _ and ., at most 64, without blanks");
        }
        good
    }

    /// A finite number.
    pub fn number(&self, key: &'static str) -> Option<Item<f64>> {
        let value = self.get(key)?;
        let number = number_of(value.get_ref());
        if number.is_none() {
            self.wrong(value, key, "a finite number");
        }
        number.map(|number| Item { value: number, span: value.span() })
    }

    /// A finite number that must be there.
    pub fn need_number(&self, key: &'static str) -> Option<Item<f64>> {
        if !self.table.contains_key(key) {
            self.missing(key, "");
        }
        self.number(key)
    }

    /// A number in a range, told otherwise; `None` where it is absent or wrong.
    pub fn number_in(&self, key: &'static str, range: (f64, f64), unit: &str) -> Option<f64> {
        let item = self.number(key)?;
        if item.value < range.0 || item.value > range.1 {
            let what = format!("`{key}` is {}, outside {} to {} {unit}", item.value, range.0, range.1);
            self.problems.error(&item.span, what.trim_end(), "");
            return None;
        }
        Some(item.value)
    }

    /// A number above 0 and not above `most` that must be there.
    pub fn need_positive(&self, key: &'static str, most: f64, unit: &str) -> Option<f64> {
        if !self.table.contains_key(key) {
            self.missing(key, "");
        }
        self.positive(key, most, unit)
    }

    /// A number above 0 and not above `most`.
    pub fn positive(&self, key: &'static str, most: f64, unit: &str) -> Option<f64> {
        let item = self.number(key)?;
        if item.value <= 0.0 || item.value > most {
            let what = format!("`{key}` is {}, it must be above 0 and at most {most} {unit}", item.value);
            self.problems.error(&item.span, what.trim_end(), "");
            return None;
        }
        Some(item.value)
    }

    /// true or false.
    pub fn boolean(&self, key: &'static str) -> Option<bool> {
        let value = self.get(key)?;
        let boolean = value.get_ref().as_bool();
        if boolean.is_none() {
            self.wrong(value, key, "true or false");
        }
        boolean
    }

    /// A list of finite numbers.
    pub fn numbers(&self, key: &'static str) -> Option<Item<Vec<f64>>> {
        let value = self.get(key)?;
        let list = value.get_ref().as_array().and_then(|a| a.iter().map(|v| number_of(v.get_ref())).collect());
        if list.is_none() {
            self.wrong(value, key, "a list of finite numbers");
        }
        list.map(|list| Item { value: list, span: value.span() })
    }

    /// A list of just `N` numbers.
    pub fn array<const N: usize>(&self, key: &'static str) -> Option<Item<[f64; N]>> {
        let item = self.numbers(key)?;
        let have = item.value.len();
        let array = <[f64; N]>::try_from(item.value).ok();
        if array.is_none() {
            self.problems.error(&item.span, format!("`{key}` has {have} numbers where {N} are wanted"), "");
        }
        array.map(|value| Item { value, span: item.span })
    }

    /// A list of pairs of numbers, first ones strictly rising, `least` or more.
    pub fn rising_pairs(&self, key: &'static str, least: usize) -> Option<Item<Vec<[f64; 2]>>> {
        let value = self.get(key)?;
        let pair = |v: &Spanned<DeValue<'_>>| {
            let list: Vec<f64> =
                v.get_ref().as_array()?.iter().map(|x| number_of(x.get_ref())).collect::<Option<_>>()?;
            <[f64; 2]>::try_from(list).ok()
        };
        let pairs: Option<Vec<[f64; 2]>> = value.get_ref().as_array().and_then(|a| a.iter().map(pair).collect());
        let Some(pairs) = pairs else {
            self.wrong(value, key, "a list of [number, number]");
            return None;
        };
        if pairs.len() < least || pairs.windows(2).any(|w| w[1][0] <= w[0][0]) {
            let what = format!("`{key}` needs {least} points or more, the first numbers rising");
            self.problems.error(&value.span(), what, "");
            return None;
        }
        Some(Item { value: pairs, span: value.span() })
    }

    /// A list of texts.
    pub fn texts(&self, key: &'static str) -> Option<Vec<Item<String>>> {
        let value = self.get(key)?;
        let text =
            |v: &Spanned<DeValue<'_>>| v.get_ref().as_str().map(|t| Item { value: t.to_string(), span: v.span() });
        let list = value.get_ref().as_array().and_then(|a| a.iter().map(text).collect());
        if list.is_none() {
            self.wrong(value, key, "a list of texts in quotes");
        }
        list
    }

    /// A text or a number, for keys that may be either.
    pub fn text_or_number(&self, key: &'static str) -> Option<Item<Result<f64, String>>> {
        let value = self.get(key)?;
        let either =
            value.get_ref().as_str().map(|t| Err(t.to_string())).or_else(|| number_of(value.get_ref()).map(Ok));
        if either.is_none() {
            self.wrong(value, key, "a number or a text");
        }
        either.map(|either| Item { value: either, span: value.span() })
    }

    /// A table inside this one.
    pub fn table(&self, key: &'static str) -> Option<Table<'p, 't>> {
        let value = self.get(key)?;
        let Some(table) = value.get_ref().as_table() else {
            self.wrong(value, key, "a table");
            return None;
        };
        Some(Table::new(self.problems, table, value.span(), &format!("[{key}]")))
    }

    /// A list of tables inside this one.
    pub fn tables(&self, key: &'static str) -> Vec<Table<'p, 't>> {
        let Some(value) = self.get(key) else { return Vec::new() };
        let Some(list) = value.get_ref().as_array() else {
            self.wrong(value, key, "a list of tables");
            return Vec::new();
        };
        let mut tables = Vec::new();
        for item in list.iter() {
            match item.get_ref().as_table() {
                Some(table) => tables.push(Table::new(self.problems, table, item.span(), &format!("[[{key}]]"))),
                None => self.wrong(item, key, "a table"),
            }
        }
        tables
    }

    /// Every key of this table with its text: for tables whose keys are names.
    pub fn entries(&self) -> Vec<(Item<String>, Item<String>)> {
        self.names.set(true);
        let mut entries = Vec::new();
        for (key, value) in self.table.iter() {
            match value.get_ref().as_str() {
                Some(text) => entries.push((
                    Item { value: key.get_ref().to_string(), span: key.span() },
                    Item { value: text.to_string(), span: value.span() },
                )),
                None => self.wrong(value, key.get_ref(), "a text in quotes"),
            }
        }
        entries
    }
}

fn number_of(value: &DeValue<'_>) -> Option<f64> {
    let text: Cow<'_, str> = match value {
        DeValue::Integer(i) if i.radix() == 10 => i.as_str().into(),
        DeValue::Float(f) => f.as_str().into(),
        _ => return None,
    };
    text.replace('_', "").parse::<f64>().ok().filter(|v| v.is_finite())
}

fn with_article(kind: &str) -> String {
    let vowel = kind.starts_with(['a', 'e', 'i', 'o']);
    format!("{} {kind}", if vowel { "an" } else { "a" })
}

/// Characters that could disturb a terminal or hide what a name says.
fn unprintable(c: char) -> bool {
    c.is_control()
        || matches!(c, '\u{200B}'..='\u{200F}' | '\u{202A}'..='\u{202E}' | '\u{2060}'..='\u{2069}' | '\u{FEFF}' | '\u{00AD}')
}

/// A word from a file, fit for a message.
pub fn shown(word: &str) -> String {
    word.chars()
        .take(60)
        .flat_map(|c| if unprintable(c) { c.escape_unicode().collect::<Vec<_>>() } else { vec![c] })
        .collect()
}

/// Edit distance of two words (Levenshtein).
fn distance(a: &str, b: &str) -> usize {
    let b: Vec<char> = b.chars().collect();
    let mut row: Vec<usize> = (0..=b.len()).collect();
    for (i, x) in a.chars().take(100).enumerate() {
        let mut diagonal = row[0];
        row[0] = i + 1;
        for (j, y) in b.iter().enumerate() {
            let best = (diagonal + usize::from(x != *y)).min(row[j] + 1).min(row[j + 1] + 1);
            diagonal = std::mem::replace(&mut row[j + 1], best);
        }
    }
    row[b.len()]
}

/// The nearest of some words, as a hint.
pub fn nearest<'a>(word: &str, words: impl IntoIterator<Item = &'a str>) -> String {
    let words: Vec<&str> = words.into_iter().collect();
    match words.iter().min_by_key(|w| distance(word, w)) {
        Some(best) if distance(word, best) <= 2.max(word.len() / 3) => format!("did you mean `{best}`?"),
        Some(_) => format!("one of: {}", words.join(", ")),
        None => "there is none yet: add it first".to_string(),
    }
}

/// Tells the second of two equal names, and where the first one is.
pub fn unique<'a>(problems: &Problems<'_>, what: &str, names: impl IntoIterator<Item = &'a Item<String>>) {
    let mut seen: Vec<&Item<String>> = Vec::new();
    for name in names {
        match seen.iter().find(|s| s.value == name.value) {
            Some(first) => {
                let message = format!("{what} `{}` stands here again", shown(&name.value));
                problems.error(&name.span, message, format!("the first one is at {}", problems.line(&first.span)));
            }
            None => seen.push(name),
        }
    }
}
