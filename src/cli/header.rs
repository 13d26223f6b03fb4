//! What a run is begun with, and must be the same when it is resumed.

use evenpoise::problem::Problem;
use evenpoise::report::Provenance;
use evenpoise::report::page::RunFacts;
use evenpoise::store::JournalHeader;
use evenpoise::store::MadeBy;
use std::collections::BTreeMap;
use std::path::Path;

/// Program and version.
pub(crate) const PROGRAM: &str = concat!("evenpoise ", env!("CARGO_PKG_VERSION"));

/// The facts of a run: the data, each setting, the problem as a whole, the program.
pub(crate) fn facts(problem: &Problem) -> JournalHeader {
    let mut facts: BTreeMap<String, String> =
        data(problem).map(|(name, digest)| (format!("the data file {name}"), digest)).collect();
    let settings = problem.tuning().listed();
    facts.extend(
        settings
            .into_iter()
            .filter(|(key, _)| *key != "threads")
            .map(|(key, value)| (format!("the setting {key}"), value)),
    );
    facts.extend(problem.model_digests().iter().cloned());
    facts.insert("the statement of the problem".to_owned(), problem.digest());
    facts.insert("the program".to_owned(), PROGRAM.to_owned());
    JournalHeader { facts }
}

/// The budgets that a run was written under, the last one last; none where its header does not say.
pub(crate) fn budgets(header: &JournalHeader) -> Vec<u64> {
    let fact = |key: &str| header.facts.get(&format!("the setting {key}")).map_or("", String::as_str);
    let earlier = fact("extended_from").trim_matches(['[', ']']).split(',');
    earlier.chain([fact("budget")]).filter_map(|budget| budget.trim().parse().ok()).collect()
}

/// Seed, versions and digests of a run.
pub(crate) fn provenance(problem: &Problem, seed: u64) -> Provenance {
    let mut digests: BTreeMap<String, String> = data(problem).collect();
    digests.insert("problem".to_owned(), problem.digest());
    digests.extend(problem.model_digests().iter().cloned());
    Provenance { seed, versions: [("program".to_owned(), PROGRAM.to_owned())].into(), digests }
}

/// What a proposal says of its making.
pub(crate) fn made_by(problem: &Problem, provenance: &Provenance, evaluations: u64) -> MadeBy {
    // By what means a model was asked leaves no trace in the proposal: the same model gives the same bytes.
    let mut digests = provenance.digests.clone();
    problem.model_digests().iter().for_each(|(what, _)| drop(digests.remove(what)));
    MadeBy { program: PROGRAM.to_owned(), digests, seed: provenance.seed, evaluations }
}

/// What the report says of a run.
pub(crate) fn facts_of_run(
    provenance: &Provenance,
    evaluations: u64,
    failed: u64,
    draws: usize,
    statement: String,
) -> RunFacts {
    RunFacts {
        program: PROGRAM.to_owned(),
        seed: provenance.seed,
        digests: provenance.digests.clone().into_iter().collect(),
        evaluations,
        failed,
        report_draws: draws as u64,
        // The copy of the problem in the run's folder holds every setting.
        command: "evenpoise tune problem.toml --out again.run".to_owned(),
        statement,
    }
}

/// Data files by their own names, wherever they lie; files of one name by their order.
fn data(problem: &Problem) -> impl Iterator<Item = (String, String)> {
    let mut seen: Vec<String> = Vec::new();
    problem.data_digests().into_iter().map(move |(file, digest)| {
        let mut name = Path::new(&file).file_name().unwrap_or_default().to_string_lossy().into_owned();
        while seen.contains(&name) {
            name.push('*');
        }
        seen.push(name.clone());
        (name, digest)
    })
}
