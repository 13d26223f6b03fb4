use super::super::record::tests::batch;
use super::*;
use crate::numeric::{Purpose, stream, uniform};
use tempfile::tempdir;

fn header(seed: &str) -> JournalHeader {
    JournalHeader { facts: [("the problem", "4f1c"), ("the seed", seed)].map(|(a, b)| (a.into(), b.into())).into() }
}

/// A journal of three batches in `folder`, and its bytes.
fn three(folder: &Path) -> (Vec<JournalBatch>, Vec<u8>) {
    let batches: Vec<JournalBatch> = (0..3).map(|round| batch(round, 1)).collect();
    let mut journal = Journal::create(folder, &header("7")).unwrap();
    batches.iter().for_each(|batch| journal.append(batch).unwrap());
    (batches, fs::read(journal_path(folder)).unwrap())
}

/// Whatever is there is a beginning of what was written; an error is a refusal, which is allowed too.
fn check(folder: &Path, batches: &[JournalBatch], whole: &[u8], context: &str) {
    let Ok((mut journal, replay)) = Journal::open_for_resume(folder, &header("7")) else { return };
    assert!(batches.starts_with(&replay.batches), "{context}: misread");
    if replay.batches.len() < batches.len() {
        let boundary = fs::metadata(journal_path(folder)).unwrap().len() == journal.length;
        assert!(boundary, "{context}: what is not whole is cut off");
    }
    // Going on gives the bytes of a run that was never interrupted.
    batches[replay.batches.len()..].iter().for_each(|batch| journal.append(batch).unwrap());
    assert_eq!(fs::read(journal_path(folder)).unwrap(), whole, "{context}");
}

#[test]
fn a_cut_at_any_byte_loses_only_what_was_torn() {
    let folder = tempdir().unwrap();
    let (batches, whole) = three(folder.path());
    let header_length = header_bytes(&header("7")).unwrap().len();
    let record = (whole.len() - header_length) / 3;
    for cut in 0..whole.len() {
        fs::write(journal_path(folder.path()), &whole[..cut]).unwrap();
        let read = Journal::read(folder.path());
        if cut < header_length {
            assert!(matches!(read, Err(StoreError::JournalUnusable { .. })), "cut {cut}");
            continue;
        }
        let (_, replay) = read.unwrap();
        assert_eq!(replay.batches.len(), (cut - header_length) / record, "cut {cut}");
        assert_eq!(replay.dropped.is_some(), !(cut - header_length).is_multiple_of(record), "cut {cut}");
        assert!(replay.dropped.is_none_or(|text| text.contains("ends in the middle")), "cut {cut}");
        check(folder.path(), &batches, &whole, &format!("cut {cut}"));
    }
}

/// 3,000 random damages of 1 to 8 bits each, anywhere, header included; after every fiftieth the run goes on.
#[test]
fn flipped_bits_are_never_misread() {
    let folder = tempdir().unwrap();
    let (batches, whole) = three(folder.path());
    let mut rng = stream(9, Purpose::Trial, 0, 0);
    let (mut refused, mut told) = (0, 0);
    for damage in 0..3000 {
        let mut bytes = whole.clone();
        for _ in 0..=(8.0 * uniform(&mut rng)) as usize {
            let bit = (uniform(&mut rng) * (bytes.len() * 8) as f64) as usize;
            bytes[bit / 8] ^= 1 << (bit % 8);
        }
        if bytes == whole {
            continue;
        }
        fs::write(journal_path(folder.path()), &bytes).unwrap();
        match Journal::read(folder.path()) {
            Err(StoreError::JournalUnusable { .. }) => refused += 1,
            Ok((_, replay)) => {
                assert!(replay.dropped.is_some() && replay.batches.len() < 3, "damage {damage} not seen");
                assert!(batches.starts_with(&replay.batches), "damage {damage} misread");
                told += 1;
                if damage % 50 == 0 {
                    check(folder.path(), &batches, &whole, &format!("damage {damage}"));
                }
            }
            Err(other) => panic!("damage {damage}: {other}"),
        }
    }
    assert!(refused > 100 && told > 1000, "{refused} refused, {told} told");
}

#[test]
fn a_record_in_the_wrong_place_is_not_believed() {
    let folder = tempdir().unwrap();
    let (batches, whole) = three(folder.path());
    let start = header_bytes(&header("7")).unwrap().len();
    let record = (whole.len() - start) / 3;
    let mut swapped = whole[..start + record].to_vec();
    swapped.extend(&whole[start + 2 * record..]);
    fs::write(journal_path(folder.path()), swapped).unwrap();
    let (_, replay) = Journal::read(folder.path()).unwrap();
    assert_eq!(replay.batches, batches[..1]);
    assert!(replay.dropped.unwrap().contains("Record 2 of the journal is damaged"));
}

#[test]
fn another_beginning_is_refused_by_name() {
    let folder = tempdir().unwrap();
    three(folder.path());
    let error = Journal::open_for_resume(folder.path(), &header("8")).unwrap_err();
    assert!(error.to_string().starts_with("the seed is not what the run"), "{error}");
    assert!(error.to_string().contains("then 7, now 8"), "{error}");
    let mut more = header("7");
    more.facts.insert("the library".to_owned(), "99aa".to_owned());
    let error = Journal::open_for_resume(folder.path(), &more).unwrap_err();
    assert!(error.to_string().contains("then nothing, now 99aa"), "{error}");
    fs::write(journal_path(folder.path()), "evenpoise-journal/9\nfrom the future").unwrap();
    let error = Journal::read(folder.path()).unwrap_err();
    assert!(error.to_string().contains("evenpoise-journal/9"), "{error}");
}

/// The device that is always full stands in for a full disk.
#[cfg(target_os = "linux")]
#[test]
fn a_full_disk_is_told_with_its_path_and_nothing_follows_a_torn_record() {
    let path = PathBuf::from("/dev/full");
    let mut journal = Journal::at(path, 0, 0).unwrap();
    for reason in ["No space left on device", "nor taken back"] {
        let error = journal.append(&batch(0, 2)).unwrap_err();
        assert_eq!(error.to_string(), "cannot write /dev/full");
        let source = std::error::Error::source(&error).unwrap().to_string();
        assert!(source.contains(reason), "{source}");
    }
}
