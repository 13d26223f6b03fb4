//! Many doubles as one text in JSON: shortest decimals between spaces, read back to the same bits.

use serde::Deserialize;
use serde::Deserializer;
use serde::Serializer;
use serde::de::Error;

pub(super) fn serialize<S: Serializer>(values: &[f64], serializer: S) -> Result<S::Ok, S::Error> {
    let texts: Vec<String> = values.iter().map(|x| format!("{x:?}")).collect();
    serializer.serialize_str(&texts.join(" "))
}

pub(super) fn deserialize<'de, D: Deserializer<'de>>(deserializer: D) -> Result<Vec<f64>, D::Error> {
    let text = String::deserialize(deserializer)?;
    let number = |word: &str| word.parse::<f64>().map_err(|_| D::Error::custom(format!("{word:?} is no number")));
    text.split_ascii_whitespace().map(number).collect()
}
