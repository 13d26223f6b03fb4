//! A walk through JSON that always knows where it is.

use serde_json::Value;

/// A value and the way to it: `components[0].scale[1][0]`.
#[derive(Debug, Clone)]
pub(super) struct At<'a> {
    value: &'a Value,
    path: String,
}

/// What is wrong, and where.
#[derive(Debug, Clone, PartialEq, Eq)]
pub(super) struct Misfit {
    pub(super) at: String,
    pub(super) reason: String,
}

impl<'a> At<'a> {
    pub(super) fn root(value: &'a Value) -> Self {
        Self { value, path: String::new() }
    }

    /// What is wrong here.
    pub(super) fn wrong(&self, reason: impl Into<String>) -> Misfit {
        let at = if self.path.is_empty() { "the whole".to_owned() } else { self.path.clone() };
        Misfit { at, reason: reason.into() }
    }

    /// The value under a key that must be there.
    pub(super) fn key(&self, name: &str) -> Result<Self, Misfit> {
        let path = self.below(name);
        let object = self.value.as_object().ok_or_else(|| self.wrong(format!("expected an object with {name:?}")))?;
        match object.get(name) {
            Some(value) => Ok(Self { value, path }),
            None => Err(Misfit { at: path, reason: "is missing".to_owned() }),
        }
    }

    /// The value under a key, where it is there and not `null`.
    pub(super) fn maybe(&self, name: &str) -> Option<Self> {
        let value = self.value.get(name).filter(|value| !value.is_null())?;
        Some(Self { value, path: self.below(name) })
    }

    /// The items of a list.
    pub(super) fn items(&self) -> Result<Vec<Self>, Misfit> {
        let items = self.value.as_array().ok_or_else(|| self.wrong("expected a list"))?;
        Ok(items.iter().enumerate().map(|(i, value)| Self { value, path: format!("{}[{i}]", self.path) }).collect())
    }

    /// A list of exactly `n` items.
    pub(super) fn items_of(&self, n: usize) -> Result<Vec<Self>, Misfit> {
        let items = self.items()?;
        if items.len() == n { Ok(items) } else { Err(self.wrong(format!("has {} items; expected {n}", items.len()))) }
    }

    /// A finite number.
    pub(super) fn number(&self) -> Result<f64, Misfit> {
        let number = self.value.as_f64().filter(|number| number.is_finite());
        number.ok_or_else(|| self.wrong(format!("is {}; expected a finite number", self.value)))
    }

    /// A whole number, zero or above.
    pub(super) fn count(&self) -> Result<u64, Misfit> {
        self.value.as_u64().ok_or_else(|| self.wrong(format!("is {}; expected a whole number", self.value)))
    }

    pub(super) fn text(&self) -> Result<&'a str, Misfit> {
        self.value.as_str().ok_or_else(|| self.wrong(format!("is {}; expected a text", self.value)))
    }

    /// The value as it is.
    pub(super) fn raw(&self) -> &'a Value {
        self.value
    }

    fn below(&self, name: &str) -> String {
        if self.path.is_empty() { name.to_owned() } else { format!("{}.{name}", self.path) }
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_step_knows_its_way() {
        let value: Value = serde_json::from_str(r#"{"a": [{"b": 1.5}, {"b": "x", "c": null}]}"#).unwrap();
        let items = At::root(&value).key("a").unwrap().items_of(2).unwrap();
        assert_eq!(items[0].key("b").unwrap().number(), Ok(1.5));
        let wrong = items[1].key("b").unwrap().number().unwrap_err();
        assert_eq!((wrong.at.as_str(), wrong.reason.as_str()), ("a[1].b", "is \"x\"; expected a finite number"));
        assert!(items[1].maybe("c").is_none() && items[0].maybe("b").is_some());
        assert_eq!(items[0].key("d").unwrap_err().at, "a[0].d");
        assert_eq!(At::root(&value).text().unwrap_err().at, "the whole");
    }
}
