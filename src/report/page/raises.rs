//! What is said of a budget that was raised.

use super::numbers::count;
use crate::adapt::Extension;
use crate::problem::Aim;

/// A sentence or two for every raise, up to `evaluations` in all.
pub(crate) fn raises(aim: Aim, extended_from: &[Extension], evaluations: u64) -> Vec<String> {
    let next = extended_from.iter().skip(1).map(|later| later.budget).chain([evaluations]);
    let raise = |(from, to): (&Extension, u64)| {
        let raised = format!(
            "When its {} evaluations were spent and its results were known, the budget was raised to {}.",
            count(from.budget),
            count(to)
        );
        let draws = count(from.report_draws);
        let kept = match aim {
            Aim::Density => format!(
                "Its {} confirm draws and {draws} report draws count as rounds {} and {}, and taught the fits that followed; the answer no longer \
                 rests on them, but on report draws made since.",
                count(from.confirm_draws),
                from.rounds.saturating_sub(1),
                from.rounds
            ),
            Aim::Expectation | Aim::Probability => format!(
                "The rounds went on after round {}, and the {draws} draws that counted until then go on counting. Whether to go on was decided \
                 with their answer in view, which the combination of rounds takes no account of.",
                from.rounds
            ),
        };
        format!("{raised} {kept}")
    };
    extended_from.iter().zip(next).map(raise).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_raise_leads_to_the_next() {
        let from = |budget, rounds| Extension { budget, rounds, confirm_draws: 100, report_draws: 500 };
        let said = raises(Aim::Density, &[from(2000, 9), from(5000, 13)], 9000);
        assert!(said[0].contains("its 2,000 evaluations") && said[0].contains("raised to 5,000"));
        assert!(said[0].contains("count as rounds 8 and 9"));
        assert!(said[1].contains("its 5,000 evaluations") && said[1].contains("raised to 9,000"));
        assert!(raises(Aim::Probability, &[from(2000, 9)], 9000)[0].contains("go on counting"));
        assert!(raises(Aim::Density, &[], 9000).is_empty());
    }
}
