//! A cursor over parsed TOML that knows where everything stands and which keys were asked for.
//!
//! Every read that fails says so in the [`Log`] and gives `None`, so that a reader asks for all its keys
//! first and combines them last: that is how one run finds every problem. An error in the log is what
//! stops the work; `None` only says that there is nothing to hand on.

use super::names::{list, nearest};
use super::problem::{Log, shown};
use std::ops::Range;
use toml::Spanned;
use toml::de::{DeTable, DeValue};

/// What a number must be.
pub(super) struct Need {
    pub(super) ok: fn(f64) -> bool,
    pub(super) says: &'static str,
}

/// Above zero.
pub(super) const POSITIVE: Need = Need { ok: |x| x > 0.0, says: "above 0" };
/// Any finite number.
pub(super) const FINITE: Need = Need { ok: |_| true, says: "a number" };
/// Anything but zero.
pub(super) const NOT_ZERO: Need = Need { ok: |x| x != 0.0, says: "other than 0" };

/// A value and its key.
#[derive(Clone, Copy)]
pub(super) struct Value<'a> {
    pub(super) log: &'a Log<'a>,
    pub(super) key: &'a str,
    value: &'a Spanned<DeValue<'a>>,
}

impl<'a> Value<'a> {
    /// Byte offset of the value.
    pub(super) fn at(&self) -> usize {
        self.value.span().start
    }

    pub(super) fn refuse(&self, what: impl Into<String>, hint: impl Into<String>) {
        self.log.error(self.at(), what, hint);
    }

    fn wrong<T>(&self, wanted: &str) -> Option<T> {
        let is = self.value.get_ref().type_str();
        let article = |noun: &str| if noun.starts_with(['a', 'i']) { "an" } else { "a" };
        self.refuse(
            format!("`{}` is {} {is}, not {} {wanted}", shown(self.key), article(is), article(wanted)),
            format!("give {} {wanted}", article(wanted)),
        );
        None
    }

    /// The text, if it is one; never a problem.
    pub(super) fn as_text(&self) -> Option<&'a str> {
        self.value.get_ref().as_str()
    }

    pub(super) fn text(&self) -> Option<&'a str> {
        self.as_text().or_else(|| self.wrong("string"))
    }

    pub(super) fn flag(&self) -> Option<bool> {
        self.value.get_ref().as_bool().or_else(|| self.wrong("boolean"))
    }

    /// A finite number that meets the need.
    pub(super) fn number(&self, need: &Need) -> Option<f64> {
        let number = match self.value.get_ref() {
            DeValue::Integer(n) => i64::from_str_radix(n.as_str(), n.radix()).ok().map(|n| n as f64),
            DeValue::Float(x) => x.as_str().parse().ok().filter(|x: &f64| x.is_finite()),
            _ => return self.wrong("number"),
        };
        let Some(number) = number else {
            self.refuse(format!("`{}` is not a finite number", self.key), format!("it must be {}", need.says));
            return None;
        };
        if !(need.ok)(number) {
            self.refuse(format!("`{}` is {number}", self.key), format!("it must be {}", need.says));
            return None;
        }
        Some(number)
    }

    /// A whole number within limits.
    pub(super) fn whole(&self, limits: Range<u32>) -> Option<u32> {
        let DeValue::Integer(n) = self.value.get_ref() else { return self.wrong("integer") };
        let number = u32::from_str_radix(n.as_str(), n.radix()).ok().filter(|n| limits.contains(n));
        if number.is_none() {
            let hint = format!("it must be a whole number from {} to {}", limits.start, limits.end - 1);
            self.refuse(format!("`{}` is {}", self.key, shown(n.as_str())), hint);
        }
        number
    }

    pub(super) fn items(&self) -> Option<Vec<Self>> {
        let Some(array) = self.value.get_ref().as_array() else { return self.wrong("array") };
        Some(array.iter().map(|value| Self { value, ..*self }).collect())
    }

    /// Exactly `N` numbers.
    pub(super) fn numbers<const N: usize>(&self, need: &Need) -> Option<[f64; N]> {
        let items = self.items()?;
        if items.len() != N {
            self.refuse(format!("`{}` has {} numbers", self.key, items.len()), format!("give {N}"));
            return None;
        }
        let numbers: Vec<_> = items.iter().map(|item| item.number(need)).collect();
        numbers.into_iter().collect::<Option<Vec<_>>>()?.try_into().ok()
    }

    /// Two or more pairs, the first of each rising strictly.
    pub(super) fn rising_pairs(&self, need: &Need) -> Option<Vec<[f64; 2]>> {
        let items = self.items()?;
        if items.len() < 2 {
            self.refuse(format!("`{}` has fewer than two points", self.key), "give two or more [x, y] pairs");
            return None;
        }
        let pairs: Vec<_> = items.iter().map(|item| item.numbers::<2>(need)).collect();
        let pairs: Vec<_> = pairs.into_iter().collect::<Option<_>>()?;
        if let Some(n) = pairs.windows(2).position(|w| w[1][0] <= w[0][0]) {
            let what = format!("`{}`: {} does not come after {}", self.key, pairs[n + 1][0], pairs[n][0]);
            items[n + 1].refuse(what, "the first numbers of the points must rise");
            return None;
        }
        Some(pairs)
    }

    pub(super) fn table(&self) -> Option<Table<'a>> {
        let Some(table) = self.value.get_ref().as_table() else { return self.wrong("table") };
        Some(Table { log: self.log, table, at: self.at(), name: format!("`{}`", self.key), asked: Vec::new() })
    }
}

/// A table and the keys asked of it.
pub(super) struct Table<'a> {
    pub(super) log: &'a Log<'a>,
    table: &'a DeTable<'a>,
    /// Byte offset of its head.
    pub(super) at: usize,
    name: String,
    asked: Vec<&'static str>,
}

impl<'a> Table<'a> {
    pub(super) fn root(log: &'a Log<'a>, table: &'a DeTable<'a>) -> Self {
        Self { log, table, at: 0, name: "this file".into(), asked: Vec::new() }
    }

    pub(super) fn optional(&mut self, key: &'static str) -> Option<Value<'a>> {
        self.asked.push(key);
        self.table.get(key).map(|value| Value { log: self.log, key, value })
    }

    pub(super) fn required(&mut self, key: &'static str) -> Option<Value<'a>> {
        let value = self.optional(key);
        if value.is_none() {
            self.log.error(self.at, format!("{} has no `{key}`", self.name), format!("add `{key} = …`"));
        }
        value
    }

    /// A number that must be there.
    pub(super) fn number(&mut self, key: &'static str, need: &Need) -> Option<f64> {
        self.required(key)?.number(need)
    }

    /// A number, or what stands for it when left out; `None` only for a bad one.
    pub(super) fn number_or(&mut self, key: &'static str, need: &Need, absent: f64) -> Option<f64> {
        self.optional(key).map_or(Some(absent), |v| v.number(need))
    }

    /// A number that may be left out; outer `None` only for a bad one.
    pub(super) fn optional_number(&mut self, key: &'static str, need: &Need) -> Option<Option<f64>> {
        self.optional(key).map_or(Some(None), |v| v.number(need).map(Some))
    }

    /// The tables `[[key]]`, in file order.
    pub(super) fn tables(&mut self, key: &'static str) -> Vec<Self> {
        let Some(value) = self.optional(key) else { return Vec::new() };
        let items = if value.value.get_ref().is_table() {
            value.refuse(format!("[{key}] is one table"), format!("write [[{key}]]: there may be several"));
            vec![value]
        } else {
            value.items().unwrap_or_default()
        };
        let name = format!("[[{key}]]");
        items.iter().filter_map(Value::table).map(|t| Self { name: name.clone(), ..t }).collect()
    }

    /// The table `[key]`, if it is there; outer `None` only if it is no table.
    pub(super) fn section(&mut self, key: &'static str) -> Option<Option<Self>> {
        let Some(value) = self.optional(key) else { return Some(None) };
        value.table().map(|t| Some(Self { name: format!("[{key}]"), ..t }))
    }

    /// Every entry of a table whose keys are the person's own, in file order, with the offset of the key.
    pub(super) fn entries(&self) -> Vec<(usize, Value<'a>)> {
        let entry = |(key, value): (&'a Spanned<_>, _)| {
            let text: &'a std::borrow::Cow<'a, str> = key.get_ref();
            (key.span().start, Value { log: self.log, key: text, value })
        };
        let mut all: Vec<_> = self.table.iter().map(entry).collect();
        all.sort_by_key(|(at, _)| *at);
        all
    }

    /// Says which keys nobody asked for.
    pub(super) fn finish(self) {
        for (at, value) in self.entries() {
            if self.asked.contains(&value.key) || self.log.full() {
                continue;
            }
            let guess = nearest(value.key, self.asked.iter().copied()).map(|k| format!("did you mean `{k}`? "));
            let hint = format!("{}known here: {}", guess.unwrap_or_default(), list(self.asked.iter().copied()));
            self.log.error(at, format!("unknown key `{}` in {}", shown(value.key), self.name), hint);
        }
    }
}
