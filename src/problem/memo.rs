//! Answers of a model that were had before, by the exact bits of the question.

use std::collections::HashMap;

/// Numbers kept in one generation: two of them are some hundreds of megabytes at most.
const MOST: usize = 8_000_000;

/// The last answers, as many as fit. Nothing ever goes through the maps in their own order.
#[derive(Debug, Default)]
pub(crate) struct Memo {
    young: HashMap<Box<[u64]>, Box<[f64]>>,
    old: HashMap<Box<[u64]>, Box<[f64]>>,
    numbers: usize,
}

impl Memo {
    pub(crate) fn keep(&mut self, question: &[f64], answer: &[f64]) {
        self.numbers += question.len() + answer.len();
        if self.numbers > MOST {
            self.old = std::mem::take(&mut self.young);
            self.numbers = question.len() + answer.len();
        }
        self.young.insert(bits(question), answer.into());
    }

    pub(crate) fn find(&self, question: &[f64]) -> Option<&[f64]> {
        let key = bits(question);
        self.young.get(&key).or_else(|| self.old.get(&key)).map(AsRef::as_ref)
    }

    pub(crate) fn is_empty(&self) -> bool {
        self.young.is_empty() && self.old.is_empty()
    }

    pub(crate) fn clear(&mut self) {
        *self = Self::default();
    }
}

fn bits(question: &[f64]) -> Box<[u64]> {
    question.iter().map(|x| x.to_bits()).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn recent_answers_are_found_and_old_ones_go() {
        let mut memo = Memo::default();
        memo.keep(&[0.1, 0.2], &[3.0]);
        assert_eq!(memo.find(&[0.1, 0.2]), Some(&[3.0][..]));
        assert_eq!(memo.find(&[0.1, 0.3]), None);
        assert!(memo.find(&[-0.0, 0.2]).is_none());
        let long = vec![0.0; MOST / 2];
        memo.keep(&[1.0], &long);
        memo.keep(&[2.0], &long);
        assert_eq!(memo.find(&[0.1, 0.2]), Some(&[3.0][..]), "the generation before is still there");
        memo.keep(&[3.0], &long);
        assert_eq!(memo.find(&[0.1, 0.2]), None);
        assert!(memo.find(&[3.0]).is_some() && memo.find(&[2.0]).is_some());
    }
}
