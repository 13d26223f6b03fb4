//! Shards that do not belong together are named and refused.

use super::common::{finish, refused, run_of, text};
use std::fs;
use std::path::Path;

fn shard(folder: &Path, name: &str, index: u32, more: &[&str]) -> String {
    let run = run_of(name).display().to_string();
    let (shard, out) = (format!("{index}/3"), format!("{name}{}", more.join("")));
    let mut arguments = vec!["estimate", &run, "--shard", &shard, "--out", &out];
    arguments.extend(if more.contains(&"--draws") { &[][..] } else { &["--draws", "900"] });
    arguments.extend(more);
    finish(folder, &arguments);
    format!("{out}/shard-{index}-of-3.json")
}

#[test]
fn shards_that_do_not_belong_together_are_named() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    let [one, two, three] = [1, 2, 3].map(|k| shard(at, "sill", k, &[]));
    let seed = shard(at, "sill", 2, &["--seed", "9"]);
    let draws = shard(at, "sill", 2, &["--draws", "901"]);
    let other = shard(at, "flood", 2, &[]);
    fs::copy(at.join(&two), at.join("copy.json")).unwrap();
    for (files, what, name) in [
        (vec![&one, &three], "missing of 3 shards: 2", "--partial"),
        (vec![&one, &two, &seed], "the seed 9", "--seed9"),
        (vec![&one, &two, &draws], "the number of draws 901", "--draws901"),
        (vec![&one, &two, &other], "the problem", "flood"),
        (vec![&one, &two, &"copy.json".to_owned(), &three], "both shard 2 of 3", "copy.json"),
    ] {
        let arguments: Vec<&str> = ["pool"].into_iter().chain(files.iter().map(|f| f.as_str())).collect();
        let said = refused(at, &arguments);
        assert!(said.contains(what) && said.contains(name), "{said}");
    }
    for (from, to) in
        [("\"draws\": 300", "\"draws\": 301"), ("\"hits\": 300", "\"hits\": 299"), ("\"seed\": 1", "\"seed\": 2")]
    {
        let whole = text(&at.join(&two));
        let changed = whole.replace(from, to);
        assert_ne!(whole, changed, "{from} is not in the file");
        fs::write(at.join("damaged.json"), changed).unwrap();
        let said = refused(at, &["pool", &one, "damaged.json", &three]);
        assert!(said.contains("damaged.json") && said.contains("checksum"), "{said}");
    }
    let cut: String = text(&at.join(&two)).chars().take(3000).collect();
    fs::write(at.join("cut.json"), cut).unwrap();
    assert!(refused(at, &["pool", &one, "cut.json", &three]).contains("cut off"));

    let partial = finish(at, &["pool", &one, &three, "--partial", "--out", "part"]);
    let shown = String::from_utf8(partial.stdout).unwrap();
    assert!(shown.contains("missing of 3 shards: 2") && shown.contains("600 of 900"), "{shown}");
    assert!(refused(at, &["pool", "part/estimate.json"]).contains("a pool without 1 of its shards"));
    finish(at, &["pool", &three, &one, &two, "--out", "all"]);
    assert!(refused(at, &["pool", &one, &two, &three, "--out", "all"]).contains("--force"));
}

#[test]
fn misuse_is_told() {
    let folder = tempfile::tempdir().unwrap();
    let at = folder.path();
    let [sill, flood] = ["sill", "flood"].map(|name| run_of(name).display().to_string());
    let sill_problem = run_of("sill").with_extension("toml").display().to_string();
    for (arguments, what) in [
        (vec!["estimate", &sill], "--draws"),
        (vec!["estimate", &sill, "--draws", "1e5", "--shard", "4/3"], "expected I/N"),
        (vec!["estimate", &sill, "--draws", "1e5", "--relative-error", "1%"], "cannot be used with"),
        (vec!["estimate", &sill, "--relative-error", "1%", "--shard", "1/2"], "cannot be used with"),
        (vec!["estimate", &sill_problem, "--draws", "10"], "--proposal RUN"),
        (vec!["estimate", &sill_problem, "--proposal", &flood, "--draws", "10"], "does not belong to this problem"),
        (vec!["estimate", &sill, "--draws", "10", "--quantiles", "1.5"], "expected a share"),
        (vec!["plan", &sill, "--relative-error", "0"], "expected a share"),
    ] {
        let said = refused(at, &arguments);
        assert!(said.contains(what), "{arguments:?}: {said}");
    }
    // A problem file with the proposal of its run is the run.
    finish(at, &["estimate", &sill_problem, "--proposal", &sill, "--draws", "2000", "--out", "a"]);
    finish(at, &["estimate", &sill, "--draws", "2000", "--out", "b"]);
    assert_eq!(text(&at.join("a/estimate.json")), text(&at.join("b/estimate.json")));
    assert!(refused(at, &["estimate", &sill, "--draws", "2000", "--out", "b"]).contains("--force"));
}
