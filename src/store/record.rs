//! One batch of evaluations as bytes.
//!
//! ```text
//! "EVAL" | number u32 | payload length u64 | checksum of these 16 bytes u64 | payload | checksum of all before u64
//! payload: purpose u8 | round u32 | points u64 | coordinates u32 | coordinate after coordinate, each a column f64
//!          | log density, a column f64 | columns u32 | each: name length u32, name, width u32, width columns f64
//! ```
//! All numbers are little-endian; a double keeps all its bits, those of a NaN included.

use super::checksum::checksum;
use crate::numeric::Points;
use crate::numeric::Purpose;

const MARK: &[u8; 4] = b"EVAL";
/// Bytes before the payload, and after it.
pub(super) const HEAD: usize = 24;
pub(super) const TAIL: usize = 8;

/// Evaluated points, as they came back from the model.
#[derive(Debug, Clone, PartialEq)]
pub struct JournalBatch {
    /// What they were evaluated for.
    pub purpose: Purpose,
    /// The round, or a count of the caller's.
    pub round: u32,
    /// The points, in the proposal's coordinates.
    pub points: Points,
    /// One log density a point; NaN where the model failed.
    pub log_density: Vec<f64>,
    /// Whatever else came back with them: margins, hits, gradients, estimates.
    pub columns: Vec<JournalColumn>,
}

/// A named quantity of one or more numbers a point.
#[derive(Debug, Clone, PartialEq)]
pub struct JournalColumn {
    /// Its name.
    pub name: String,
    /// The numbers: as many points as the batch has.
    pub values: Points,
}

/// The record of a batch, number `number` in its journal.
///
/// # Panics
/// When a column has another number of points than the batch.
pub(super) fn encode(number: u32, batch: &JournalBatch) -> Vec<u8> {
    let n = batch.points.len();
    assert_eq!(batch.log_density.len(), n, "one log density a point");
    let mut bytes = MARK.to_vec();
    bytes.extend(number.to_le_bytes());
    bytes.extend([0; 16]); // length and checksum, when they are known
    bytes.push(batch.purpose as u8);
    bytes.extend(batch.round.to_le_bytes());
    bytes.extend((n as u64).to_le_bytes());
    bytes.extend((batch.points.dim() as u32).to_le_bytes());
    put_columns(&mut bytes, &batch.points);
    batch.log_density.iter().for_each(|x| bytes.extend(x.to_le_bytes()));
    bytes.extend((batch.columns.len() as u32).to_le_bytes());
    for column in &batch.columns {
        assert_eq!(column.values.len(), n, "column {}: one value a point", column.name);
        bytes.extend((column.name.len() as u32).to_le_bytes());
        bytes.extend(column.name.as_bytes());
        bytes.extend((column.values.dim() as u32).to_le_bytes());
        put_columns(&mut bytes, &column.values);
    }
    let length = (bytes.len() - HEAD) as u64;
    bytes[8..16].copy_from_slice(&length.to_le_bytes());
    let head = checksum(&bytes[..16]);
    bytes[16..24].copy_from_slice(&head.to_le_bytes());
    let all = checksum(&bytes);
    bytes.extend(all.to_le_bytes());
    bytes
}

/// Payload length that a record's head claims, if the head is whole and is that of record `number`.
pub(super) fn payload_length(head: &[u8], number: u32) -> Option<u64> {
    let mut reader = Reader(head);
    let (mark, found, length, sum) = (reader.take(4)?, reader.u32()?, reader.u64()?, reader.u64()?);
    (mark == MARK && found == number && sum == checksum(&head[..16])).then_some(length)
}

/// The batch in a record whose head was accepted; nothing when a checksum or a length is not right.
pub(super) fn decode(record: &[u8]) -> Option<JournalBatch> {
    let (body, sum) = record.split_at_checked(record.len().checked_sub(TAIL)?)?;
    if Reader(sum).u64()? != checksum(body) {
        return None;
    }
    let mut reader = Reader(body.get(HEAD..)?);
    let purpose = purpose_of(reader.take(1)?[0])?;
    let round = reader.u32()?;
    let n = usize::try_from(reader.u64()?).ok()?;
    let dim = reader.u32()? as usize;
    let points = reader.points(n, dim)?;
    let log_density = reader.points(n, 1)?.coordinate(0);
    let n_columns = reader.u32()?;
    let mut columns = Vec::new();
    for _ in 0..n_columns {
        let length = reader.u32()? as usize;
        let name = String::from_utf8(reader.take(length)?.to_vec()).ok()?;
        let width = reader.u32()? as usize;
        columns.push(JournalColumn { name, values: reader.points(n, width)? });
    }
    reader.0.is_empty().then_some(JournalBatch { purpose, round, points, log_density, columns })
}

fn put_columns(bytes: &mut Vec<u8>, points: &Points) {
    for j in 0..points.dim() {
        for i in 0..points.len() {
            bytes.extend(points.get(i, j).to_le_bytes());
        }
    }
}

/// The purpose a number stands for.
fn purpose_of(number: u8) -> Option<Purpose> {
    use Purpose::{Compare, Confirm, Production, Refit, Report, Resample, Round, Survey, Trial};
    [Survey, Round, Refit, Confirm, Report, Production, Trial, Resample, Compare]
        .into_iter()
        .find(|&p| p as u8 == number)
}

/// Bytes still to be read; every step says whether there were enough.
struct Reader<'a>(&'a [u8]);

impl<'a> Reader<'a> {
    fn take(&mut self, n: usize) -> Option<&'a [u8]> {
        let (taken, rest) = self.0.split_at_checked(n)?;
        self.0 = rest;
        Some(taken)
    }

    fn u32(&mut self) -> Option<u32> {
        Some(u32::from_le_bytes(self.take(4)?.try_into().ok()?))
    }

    fn u64(&mut self) -> Option<u64> {
        Some(u64::from_le_bytes(self.take(8)?.try_into().ok()?))
    }

    /// `n` points of `dim` numbers. Sizes are checked against the bytes that are there before anything is allocated.
    fn points(&mut self, n: usize, dim: usize) -> Option<Points> {
        let bytes = self.take(n.checked_mul(dim)?.checked_mul(8)?)?;
        if dim == 0 && n > 0 {
            return Some(Points::zeros(0, n));
        }
        let mut points = Points::zeros(dim, n);
        for (at, number) in bytes.chunks_exact(8).enumerate() {
            points.set(at % n, at / n, f64::from_le_bytes(number.try_into().ok()?));
        }
        Some(points)
    }
}

#[cfg(test)]
pub(super) mod tests {
    use super::*;

    /// A small batch with everything in it that is easily lost.
    pub(crate) fn batch(round: u32, n: usize) -> JournalBatch {
        let mut points = Points::new(2);
        let mut gradient = Points::new(2);
        for i in 0..n {
            points.push(&[i as f64 + 0.1, -1.0 / (1.0 + i as f64)]);
            gradient.push(&[f64::MIN_POSITIVE / 8.0, 1e300]);
        }
        let log_density = (0..n).map(|i| if i % 3 == 1 { f64::NEG_INFINITY } else { -(i as f64) }).collect();
        let columns = vec![JournalColumn { name: "gradient, exact".to_owned(), values: gradient }];
        JournalBatch { purpose: Purpose::Round, round, points, log_density, columns }
    }

    #[test]
    fn a_batch_comes_back_bit_for_bit() {
        for n in [0, 1, 127, 300] {
            let batch = batch(3, n);
            let record = encode(7, &batch);
            assert_eq!(payload_length(&record[..HEAD], 7), Some((record.len() - HEAD - TAIL) as u64));
            assert_eq!(decode(&record).as_ref(), Some(&batch), "n = {n}");
        }
        let failed = JournalBatch {
            log_density: vec![f64::from_bits(0x7FF8_0000_0000_BEEF)],
            columns: Vec::new(),
            ..batch(1, 1)
        };
        let back = decode(&encode(0, &failed)).unwrap();
        assert_eq!(back.log_density[0].to_bits(), 0x7FF8_0000_0000_BEEF);
    }

    #[test]
    fn every_flipped_bit_is_seen() {
        let record = encode(2, &batch(1, 2));
        for bit in 0..record.len() * 8 {
            let mut damaged = record.clone();
            damaged[bit / 8] ^= 1 << (bit % 8);
            let believed = payload_length(&damaged[..HEAD], 2).is_some() && decode(&damaged).is_some();
            assert!(!believed, "bit {bit}");
        }
        assert_eq!(payload_length(&record[..HEAD], 3), None, "a record out of its place");
    }

    #[test]
    fn every_purpose_is_known() {
        for number in 0..=u8::MAX {
            assert!(purpose_of(number).is_none_or(|purpose| purpose as u8 == number));
        }
        // A new purpose does not compile here until it is listed, and then the count must follow.
        let listed = |purpose| match purpose {
            Purpose::Survey | Purpose::Round | Purpose::Refit | Purpose::Confirm | Purpose::Report => true,
            Purpose::Production | Purpose::Trial | Purpose::Resample | Purpose::Compare => true,
        };
        assert_eq!((0..=u8::MAX).filter_map(purpose_of).filter(|&purpose| listed(purpose)).count(), 9);
    }
}
