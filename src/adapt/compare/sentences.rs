//! The recommendation in a sentence.

use super::judgement::Difference;
use super::scored::Contestant;
use crate::weights::TailReason;
use crate::weights::verdict::checks::TAIL_SOUND;

pub(super) fn removes_risk(light: &Contestant, heavy: &Contestant) -> String {
    let price = price(light, heavy);
    format!("{}: {price} removes the risk of weights without a finite variance; {}.", heavy.name, tail(light))
}

pub(super) fn lowers_risk(light: &Contestant, heavy: &Contestant) -> String {
    let price = price(light, heavy);
    format!(
        "{}: {price} lowers the risk of weights without a finite variance, though its own are not free of it; {}, and {}.",
        heavy.name,
        tail(light),
        tail(heavy)
    )
}

/// What heavy tails cost or gain, up to the next verb.
fn price(light: &Contestant, heavy: &Contestant) -> String {
    let [from, to] = [light, heavy].map(|c| c.merits.ess_fraction.value);
    let ratio = to / from;
    if ratio < 0.995 {
        format!("costs {} of the ESS and", percent(1.0 - ratio))
    } else if ratio > 1.005 {
        format!("raises the ESS fraction from {} to {} and", percent(from), percent(to))
    } else {
        "costs nothing of the ESS and".to_owned()
    }
}

pub(super) fn gains(light: &Contestant, heavy: &Contestant, gain: Option<&Difference>) -> String {
    format!(
        "{}: its ESS fraction is {} against {} of the Gaussian mixture{}; neither has a tail that makes its error doubtful.",
        heavy.name,
        percent(heavy.merits.ess_fraction.value),
        percent(light.merits.ess_fraction.value),
        chance(gain)
    )
}

pub(super) fn enough(light: &Contestant, heavy: &Contestant, gain: Option<&Difference>) -> String {
    let gap = light.merits.ess_fraction.value - heavy.merits.ess_fraction.value;
    let other = if gap > 0.0 { "costs" } else { "would add" };
    format!(
        "Gaussian: light tails are enough; {}, and {} {other} {:.1} points of ESS fraction{}.",
        tail(light),
        heavy.name,
        100.0 * gap.abs(),
        chance(gain)
    )
}

pub(super) fn power_tail(light: &Contestant, heavy: &Contestant) -> String {
    format!(
        "Undecided: the draws of the Gaussian mixture show no risk ({}), but the Student-t fit asks for few degrees of freedom ({}), \
         which speaks for a tail that those draws have hardly met. Raise the budget.",
        tail(light),
        heavy.name
    )
}

pub(super) fn gain_of_fit(light: &Contestant, heavy: &Contestant) -> String {
    format!(
        "Undecided: {} has the higher ESS fraction ({} against {}), but its components are nearly Gaussian, so the gain is not one of \
         tails. Raise the budget.",
        heavy.name,
        percent(heavy.merits.ess_fraction.value),
        percent(light.merits.ess_fraction.value)
    )
}

pub(super) fn gain_with_risk(heavy: &Contestant) -> String {
    format!("Undecided: {} has the higher ESS fraction, but {}. Raise the budget.", heavy.name, tail(heavy))
}

pub(super) fn both_at_risk(light: &Contestant, heavy: &Contestant) -> String {
    format!(
        "Undecided: neither family has weights whose variance is safe; {}, and {}. Raise the budget, or see what makes the target heavy.",
        tail(light),
        tail(heavy)
    )
}

pub(super) fn nothing_met() -> String {
    "Undecided: no draw met what is sought, so there is nothing to compare. Raise the budget.".to_owned()
}

/// What is known of the top of a contestant's weights, as a clause.
fn tail(contestant: &Contestant) -> String {
    let name = &contestant.name;
    let Some(score) = &contestant.score else { return format!("no draw of {name} met the target") };
    match score.tail.reason {
        TailReason::Bounded => format!("the weights of {name} are bounded"),
        TailReason::TooFew => format!("too few draws of {name} lie in the tail to know its shape"),
        TailReason::Fitted => {
            let [shape, upper] = [score.tail.shape, score.tail.upper].map(|k| format!("{k:.2}").replace('-', "−"));
            let even = if score.tail.upper > TAIL_SOUND && score.weight_variance < 0.05 {
                ", but too even for it to matter"
            } else {
                ""
            };
            format!("the weights of {name} have the tail shape {shape}, at most {upper} (limit {TAIL_SOUND}){even}")
        }
    }
}

fn chance(gain: Option<&Difference>) -> String {
    match gain.and_then(|g| g.significance) {
        Some(chance) if chance < 0.001 => " (chance below 0.1 % were there no difference)".to_owned(),
        Some(chance) => format!(" (chance {} were there no difference)", percent(chance)),
        None => " (whose error is not known)".to_owned(),
    }
}

fn percent(x: f64) -> String {
    let hundred = 100.0 * x;
    if hundred < 10.0 { format!("{hundred:.1} %") } else { format!("{hundred:.0} %") }
}
