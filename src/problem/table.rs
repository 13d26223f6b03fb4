//! TOML tables in the order of the text, with the place of every key and value.

use std::ops::Range;

use toml::Spanned;
use toml::de::DeTable;
use toml::de::DeValue;

use super::faults::Fault;
use super::faults::Faults;
use super::foreign::meant_key;
use super::names::all_of;
use super::names::listed;
use super::text_value::Text;
use crate::expression::nearest;

/// A table whose entries stand in the order of the text.
#[derive(Debug, Clone)]
pub(crate) struct Table<'a> {
    /// How messages call it: `[variables]`, or `the variable x`.
    pub(crate) name: String,
    pub(crate) span: Range<usize>,
    pub(crate) entries: Vec<Entry<'a>>,
}

/// A key with its value, or an item of a list (then the key is that of the list).
#[derive(Debug, Clone)]
pub(crate) struct Entry<'a> {
    pub(crate) key: &'a str,
    pub(crate) key_span: Range<usize>,
    pub(crate) value: &'a DeValue<'a>,
    pub(crate) span: Range<usize>,
}

impl<'a> Table<'a> {
    pub(crate) fn new(name: impl Into<String>, table: &'a DeTable<'a>, span: Range<usize>) -> Self {
        let mut entries: Vec<Entry<'a>> = table
            .iter()
            .map(|(key, value)| Entry {
                key: key.get_ref(),
                key_span: key.span(),
                value: value.get_ref(),
                span: value.span(),
            })
            .collect();
        entries.sort_by_key(|entry| entry.key_span.start);
        Self { name: name.into(), span, entries }
    }

    pub(crate) fn entry(&self, key: &str) -> Option<&Entry<'a>> {
        self.entries.iter().find(|entry| entry.key == key)
    }

    /// The entry with this key or, failing that, one with an unknown key that is nearest to it among the `known` ones.
    pub(crate) fn entry_or_slip(&self, key: &str, known: &[&str]) -> Option<&Entry<'a>> {
        let slip = |entry: &&Entry<'a>| !known.contains(&entry.key) && meant_key(entry.key, known) == Some(key);
        self.entry(key).or_else(|| self.entries.iter().find(slip))
    }
}

/// Keys with the place where they belong, for those that stand elsewhere.
const HOMES: [(&str, &str); 20] = [
    ("title", "at the head of the file, before the first table"),
    ("aim", "under [target]"),
    ("log_factor", "under [target]"),
    ("log_density", "under [target]"),
    ("integrand", "under [target]"),
    ("event", "under [target]"),
    ("require", "under [target]"),
    ("failed", "under [target]"),
    ("file", "under [data]"),
    ("missing", "under [data]"),
    ("budget", "under [tuning]"),
    ("rounds", "under [tuning]"),
    ("round_draws", "under [tuning]"),
    ("seed", "under [tuning]"),
    ("family", "under [tuning]"),
    ("components", "under [tuning]"),
    ("coordinates", "under [tuning]"),
    ("threads", "under [tuning]"),
    ("among", "under [[correlation]]"),
    ("linear", "under [[correlation]]"),
];

/// Where a key belongs, if anywhere.
pub(crate) fn home_of(key: &str) -> Option<&'static str> {
    HOMES.iter().find(|(known, _)| *known == key).map(|(_, home)| *home)
}

/// Reads typed values out of a document and keeps what is wrong.
#[derive(Debug)]
pub(crate) struct Reader<'s> {
    pub(crate) source: &'s str,
    pub(crate) faults: Faults,
    /// Names that were given to something stated wrongly: formulas that use them are not to blame.
    pub(crate) faulty: Vec<String>,
    /// Tables of data whose columns are not known; the empty text for a plain `[data]`.
    pub(crate) open: Vec<String>,
    /// Texts that stand where they cannot be read as formulas. The names in them count as used.
    pub(crate) mentions: Vec<String>,
}

impl<'s> Reader<'s> {
    pub(crate) fn new(source: &'s str) -> Self {
        Self { source, faults: Faults::default(), faulty: Vec::new(), open: Vec::new(), mentions: Vec::new() }
    }

    /// Notes the texts in a value that stands where it cannot be read.
    pub(crate) fn mention(&mut self, value: &DeValue<'_>) {
        match value {
            DeValue::String(text) => self.mentions.push(text.to_string()),
            DeValue::Array(items) => items.iter().for_each(|item| self.mention(item.get_ref())),
            DeValue::Table(table) => table.iter().for_each(|(_, item)| self.mention(item.get_ref())),
            _ => {}
        }
    }

    /// Whether `name` may be a column of data that could not be read.
    pub(crate) fn may_be_a_column(&self, name: &str) -> bool {
        let table = name.rsplit_once('.').map_or("", |(table, _)| table);
        self.open.iter().any(|open| open == table) || self.faulty.iter().any(|faulty| faulty == name)
    }

    pub(crate) fn fault(&mut self, fault: Fault) {
        self.faults.push(fault);
    }

    /// Keys of `table` that are not `known` are faults.
    pub(crate) fn only(&mut self, table: &Table<'_>, known: &[&str]) {
        for entry in table.entries.iter().filter(|entry| !known.contains(&entry.key)) {
            self.unknown_key(entry, &table.name, known);
            self.mention(entry.value);
        }
    }

    pub(crate) fn unknown_key(&mut self, entry: &Entry<'_>, place: &str, known: &[&str]) {
        let fault =
            Fault::new(entry.key_span.clone(), format!("`{}` is no key of {place}", entry.key)).label("unknown key");
        let home = home_of(entry.key);
        self.fault(match meant_key(entry.key, known) {
            Some(near) => fault.help(format!("did you mean `{near}`?")),
            None if home.is_some() => {
                let home = home.unwrap_or_default();
                fault.help(format!("`{}` belongs {home}", entry.key))
            }
            None => fault.help(format!("the keys of {place} are {}", all_of(known))),
        });
    }

    /// A value of the wrong kind: "`near` wants a number", with an example.
    pub(crate) fn wants(&mut self, entry: &Entry<'_>, what: &str, example: &str) {
        self.fault(
            Fault::new(entry.span.clone(), format!("`{}` wants {what}", entry.key))
                .label(format!("this is {}", kind(entry.value)))
                .help(format!("write {example}")),
        );
    }

    /// A number; whole numbers are numbers too.
    pub(crate) fn number(&mut self, entry: &Entry<'_>, example: &str) -> Option<f64> {
        let found = plain_number(entry.value);
        if found.is_none() {
            let quoted = entry.value.as_str().and_then(|text| text.trim().parse::<f64>().ok());
            match quoted {
                Some(number) if example.starts_with(entry.key) => {
                    self.wants(entry, "a number", &format!("it without quotes: {number:?}"));
                }
                _ => self.wants(entry, "a number", example),
            }
        }
        if found.is_some_and(f64::is_nan) {
            self.fault(
                Fault::new(entry.span.clone(), format!("`{}` is not a number", entry.key))
                    .help("`nan` stands for no value here; write the number that is meant"),
            );
            return None;
        }
        found
    }

    /// A whole number of at least `least`.
    pub(crate) fn count(&mut self, entry: &Entry<'_>, least: u64, example: &str) -> Option<u64> {
        let number = plain_number(entry.value);
        match number {
            Some(n) if n >= least as f64 && n.fract() == 0.0 && n < 9e15 => Some(n as u64),
            Some(_) => {
                self.fault(
                    Fault::new(entry.span.clone(), format!("`{}` wants a whole number, {least} or more", entry.key))
                        .help(format!("write {example}")),
                );
                None
            }
            None => {
                self.wants(entry, "a whole number", example);
                None
            }
        }
    }

    pub(crate) fn text(&mut self, entry: &Entry<'_>, example: &str) -> Option<Text> {
        match entry.value {
            DeValue::String(value) => Some(Text::new(self.source, value, entry.span.clone())),
            _ => {
                self.wants(entry, "a text in quotes", example);
                None
            }
        }
    }

    /// One of `known` words.
    pub(crate) fn word(&mut self, entry: &Entry<'_>, known: &[&str]) -> Option<String> {
        let example = format!("{} = \"{}\"", entry.key, known[0]);
        let text = self.text(entry, &example)?;
        if known.contains(&text.value.as_str()) {
            return Some(text.value);
        }
        let quoted: Vec<String> = known.iter().map(|word| format!("\"{word}\"")).collect();
        let all = listed(&quoted).replace('`', "");
        let fault = Fault::new(entry.span.clone(), format!("`{}` knows no \"{}\"", entry.key, text.value))
            .label("unknown word");
        self.fault(match nearest(&text.value, known.iter().copied()) {
            Some(near) => fault.help(format!("did you mean \"{near}\"? The words are {all}")),
            None => fault.help(format!("write {all}")),
        });
        None
    }

    pub(crate) fn table<'a>(&mut self, entry: &Entry<'a>, name: &str, example: &str) -> Option<Table<'a>> {
        match entry.value {
            DeValue::Table(table) => Some(Table::new(name, table, entry.key_span.clone())),
            _ => {
                self.wants(entry, "a table", example);
                None
            }
        }
    }

    pub(crate) fn list<'a>(&mut self, entry: &Entry<'a>, example: &str) -> Option<Vec<Entry<'a>>> {
        match entry.value {
            DeValue::Array(items) => Some(items.iter().map(|item| item_entry(entry, item)).collect()),
            _ => {
                self.wants(entry, "a list in square brackets", example);
                None
            }
        }
    }

    /// A list of texts.
    ///
    /// A single text is told, and taken for a list of one.
    pub(crate) fn texts(&mut self, entry: &Entry<'_>, example: &str) -> Option<Vec<Text>> {
        if let DeValue::String(value) = entry.value {
            let written = &self.source[entry.span.clone()];
            self.wants(entry, "a list in square brackets", &format!("{} = [{written}]", entry.key));
            return Some(vec![Text::new(self.source, value, entry.span.clone())]);
        }
        let items = self.list(entry, example)?;
        items.iter().map(|item| self.text(item, example)).collect()
    }

    /// `[low, high]` with `low < high`; infinite ends are allowed.
    pub(crate) fn interval(&mut self, entry: &Entry<'_>, example: &str) -> Option<(f64, f64)> {
        let items = self.list(entry, example)?;
        if items.len() != 2 {
            self.fault(
                Fault::new(entry.span.clone(), format!("`{}` wants two numbers, its low and its high end", entry.key))
                    .label(format!("{} here", items.len()))
                    .help(format!("write {example}")),
            );
            return None;
        }
        let low = self.number(&items[0], example);
        let high = self.number(&items[1], example);
        let (low, high) = (low?, high?);
        if low >= high || low == f64::INFINITY || high == f64::NEG_INFINITY {
            self.fault(
                Fault::new(
                    entry.span.clone(),
                    format!("`{}` is empty: its low end must be below its high end", entry.key),
                )
                .help(format!("write {} = [{high:?}, {low:?}] if the ends were swapped", entry.key)),
            );
            return None;
        }
        Some((low, high))
    }
}

fn item_entry<'a>(list: &Entry<'a>, item: &'a Spanned<DeValue<'a>>) -> Entry<'a> {
    Entry { key: list.key, key_span: item.span(), value: item.get_ref(), span: item.span() }
}

/// The number that a TOML value is, `nan` included.
pub(crate) fn plain_number(value: &DeValue<'_>) -> Option<f64> {
    match value {
        DeValue::Float(float) => float.as_str().parse().ok(),
        DeValue::Integer(integer) => i64::from_str_radix(integer.as_str(), integer.radix()).ok().map(|n| n as f64),
        _ => None,
    }
}

/// What a TOML value is, in words.
pub(crate) fn kind(value: &DeValue<'_>) -> &'static str {
    match value {
        DeValue::String(_) => "a text",
        DeValue::Integer(_) | DeValue::Float(_) => "a number",
        DeValue::Boolean(_) => "true or false",
        DeValue::Datetime(_) => "a date",
        DeValue::Array(_) => "a list",
        DeValue::Table(_) => "a table",
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn entries_stand_in_the_order_of_the_text() {
        let text = "zebra = 1\n[b.late]\nx = 1\n[b.early]\nx = 2\n[a]\ny = 3\n";
        let document = DeTable::parse(text).unwrap();
        let table = Table::new("the file", document.get_ref(), document.span());
        let keys: Vec<&str> = table.entries.iter().map(|entry| entry.key).collect();
        assert_eq!(keys, ["zebra", "b", "a"]);
        let mut reader = Reader::new(text);
        let inner = reader.table(&table.entries[1], "[b]", "").unwrap();
        let keys: Vec<&str> = inner.entries.iter().map(|entry| entry.key).collect();
        assert_eq!(keys, ["late", "early"]);
        assert_eq!(&text[inner.entries[1].key_span.clone()], "early");
    }
}
