//! What was computed and why, in words, with sources.

use super::blocks::{Block, Span, plain};
use super::sources::{Bibliography, Source};
use crate::problem::Aim;

/// The method of an aim, in paragraphs.
pub(crate) fn paragraphs(aim: Aim, bibliography: &mut Bibliography) -> Vec<Block> {
    let steps = match aim {
        Aim::Density => density(bibliography),
        Aim::Probability | Aim::Expectation => rare(aim, bibliography),
    };
    steps.into_iter().map(Block::Paragraph).collect()
}

/// A titled step: text, sources, text, sources, ...
fn step(bibliography: &mut Bibliography, title: &str, parts: &[(&str, &[Source])]) -> Vec<Span> {
    let mut spans = vec![Span::Strong(format!("{title}. "))];
    for (text, sources) in parts {
        spans.push(plain(*text));
        if !sources.is_empty() {
            spans.push(bibliography.cite(sources));
        }
    }
    spans
}

fn density(b: &mut Bibliography) -> Vec<Vec<Span>> {
    use Source::{
        AssarafCaffarel, Cappe, Cornuet, Douc, Hesterberg, Kong, LiuRubin, Mira, OwenZhou, PeelMcLachlan, VeachGuibas,
        Vehtari, ZhangStephens,
    };
    vec![
        step(
            b,
            "Weights",
            &[
                (
                    "Points x are drawn from a proposal q that is known in full, and each carries the weight w(x) = f(x) / q(x), where f is the \
             density to be integrated. The mean of the weights estimates Z = ∫ f(x) dx; weighted means of any quantity estimate its mean \
             under f / Z. How far off they are is decided by how even the weights are, so all the work goes into finding a q that is \
             close to f / Z and nowhere much thinner than it",
                    &[Hesterberg],
                ),
                (".", &[]),
            ],
        ),
        step(
            b,
            "Survey",
            &[(
                "Climbs by a quasi-Newton method start from points spread over the start distribution, near its centre, around it and outside \
             of it. Ends within a mode of each other are one mode. The curvature at a mode gives the scale of the component that the first \
             proposal has there. The survey is what can find a mode that lies apart: no diagnostic of the weights sees a mode that no draw \
             has met.",
                &[],
            )],
        ),
        step(
            b,
            "Rounds",
            &[
                (
                    "Every round draws from the present proposal, stratified over its components, and keeps all points of all rounds in one pool, \
             weighted by the balance heuristic: the denominator is the mixture of all proposals drawn from so far",
                    &[VeachGuibas, OwenZhou, Cornuet],
                ),
                (
                    ". While the pool carries too few effective draws, the next fit aims at the target raised to a power g below 1; g rises to 1 by \
             itself as the pool improves.",
                    &[],
                ),
            ],
        ),
        step(
            b,
            "Refits",
            &[
                (
                    "Candidates for the next proposal are fitted to the pool by weighted expectation maximisation for mixtures of Gaussian and \
             Student-t components",
                    &[Cappe, PeelMcLachlan],
                ),
                (", the degrees of freedom by a search in one dimension", &[LiuRubin]),
                (
                    "; among them are fits anchored to the present scales, fits with more and with fewer components, moment matching, and a step \
             towards least weight variance",
                    &[Douc],
                ),
                (
                    ". Where the target gives its gradient, means that integration by parts makes known take noise out of the moments fitted",
                    &[AssarafCaffarel, Mira],
                ),
                (
                    ". Candidates are ranked by their weighted log density on points that are held out for good, so that no candidate is judged by what \
             it was fitted to, and at no cost in evaluations. The present proposal is among them and stays unless it is beaten. Where single \
             heavy draws show that the proposal is too thin, a component is born there from the local curvature.",
                    &[],
                ),
            ],
        ),
        step(
            b,
            "Defensive parts",
            &[
                (
                    "A halo (the components again, twice as wide and with heavy tails) and the wide start keep a share of every proposal",
                    &[Hesterberg, OwenZhou],
                ),
                (
                    ". They cost at most that share of efficiency and find mass that the fitted components miss. They bound the weights only if the \
             wide start dominates the target everywhere, which is not known.",
                    &[],
                ),
            ],
        ),
        step(
            b,
            "Choice and report draws",
            &[(
                "The last fits are joined, their shares set by minimising the predicted weight variance, which is a convex problem. Fresh confirm \
             draws decide whether an earlier round did better. The proposal is then frozen, and the rest of the budget is drawn from it: \
             the report draws. They neither trained nor chose the proposal, and their number was fixed before any of them was seen. Every \
             answer, score and check on this page rests on them alone.",
                &[],
            )],
        ),
        step(
            b,
            "Scores",
            &[
                ("Effective sample size: (Σ w)² / Σ w² draws", &[Kong]),
                (
                    ", shown as a fraction of the draws; perplexity: exp(entropy of the weights) as a fraction of the draws",
                    &[Cappe],
                ),
                (
                    ". Tail shape: the shape of a generalised Pareto distribution fitted to the largest weights",
                    &[ZhangStephens],
                ),
                (
                    "; below 0.5 the variance of the weights is finite and their mean has an honest error; the number of tail points and the weak \
             prior follow a published recipe",
                    &[Vehtari],
                ),
                (
                    ". The limit for a sound result is held against the upper bound of the shape, because these are plain means of weights, not \
             smoothed ones.",
                    &[],
                ),
            ],
        ),
        step(
            b,
            "Answers and errors",
            &[
                (
                    "The normalising constant is the plain mean of the weights, its logarithm's error by the delta method. Means are self-normalised \
             ratios Σ w h / Σ w with delta-method errors",
                    &[Hesterberg],
                ),
                (
                    ". Errors take into account that the draws were stratified over the components. Intervals are nominal 95 % ones.",
                    &[],
                ),
            ],
        ),
    ]
}

fn rare(aim: Aim, b: &mut Bibliography) -> Vec<Vec<Span>> {
    use Source::{
        DerKiureghianDakessian, FayFeuer, HasoferLind, Hesterberg, Kong, LiuDerKiureghian, Marin,
        PapaioannouGeyerStraub, Rosenblatt, SquareRootRule, Vehtari, ZhangStephens,
    };
    let event = aim == Aim::Probability;
    let mut steps = vec![
        step(
            b,
            "Weights",
            &[
                (
                    if event {
                        "Points x are drawn from a proposal q that is known in full. A point inside the event counts with its weight p(x) / q(x), where p \
                 is the joint density of the variables; any other counts zero. The mean is an unbiased estimate of the probability, whatever q is; \
                 its error is decided by how even the weights inside the event are"
                    } else {
                        "Points x are drawn from a proposal q that is known in full. Each contributes the integrand times its weight p(x) / q(x), where p is \
                 the joint density of the variables. The mean is an unbiased estimate of the expectation, whatever q is; its error is decided by \
                 how even the contributions are"
                    },
                    &[Hesterberg],
                ),
                (".", &[]),
            ],
        ),
        step(
            b,
            "Coordinates",
            &[
                ("The proposal lives in independent standard normal scores of the variables", &[Rosenblatt]),
                ("; correlations are those of a Gaussian copula", &[LiuDerKiureghian]),
                (".", &[]),
            ],
        ),
    ];
    if event {
        steps.push(step(
            b,
            "Survey",
            &[
                ("Searches look for the points of the event nearest to the origin in these scores", &[HasoferLind]),
                (", for several of them, away from those already found", &[DerKiureghianDakessian]),
                (". The first proposal has a component at each.", &[]),
            ],
        ));
    } else {
        steps.push(step(b, "Survey", &[(
            "Searches look for the places where the size of the integrand times the density of the variables is largest. The first proposal has a \
             component at each.", &[])]));
    }
    steps.extend([
        step(b, "Rounds", &[(
            if event {
                "Every round draws from the present proposal. The next one is fitted to all points so far, with the event smoothed by a normal \
                 distribution function of its margin; the smoothing shrinks until the event itself is met"
            } else {
                "Every round draws from the present proposal, and the next one is fitted to all points so far, weighted by the size of the integrand, \
                 smoothed at first where too few points carry it"
            }, &[PapaioannouGeyerStraub]), (
            ". Copies of the components with unit covariance, inflated copies, and a share of the variables' own distribution keep the weights in \
             bounds", &[Hesterberg]), (".", &[])]),
        step(b, "The answer", &[(
            "Every round that was drawn after the event was first reached counts, with a weight that was fixed before it was drawn, so that the \
             combination is unbiased", &[SquareRootRule]), (
            ". A value pooled over all rounds is adapted to the very points it is made from; its bias has no general bound", &[Marin]), (
            ", so where it is shown it is labelled as such and decides nothing.", &[])]),
        step(b, "Errors", &[(
            "With 100 effective hits and more the interval is normal on the log scale; with fewer it is the gamma interval for weighted counts", &[FayFeuer]), (
            ". Effective draws of the answer: (Σ z)² / Σ z² over the contributions z", &[Kong]), (
            ". Tail shape: a generalised Pareto fit to the largest contributions", &[ZhangStephens, Vehtari]), (".", &[])]),
    ]);
    steps
}

/// What the kinds of refit are, for those that occur.
pub(crate) fn refit_kind(name: &str) -> &'static str {
    match name {
        "kept" => "the present proposal as it is",
        "tails" => "other degrees of freedom, everything else untouched",
        "cross-entropy" => "expectation maximisation on the weighted points",
        "anchored" => "the same, held to the present scales by a prior",
        "anchored-firmly" => "the same, held more firmly",
        "pooled-scale" => "the same, held to the average scale of all components",
        "diagonal" => "the same, with diagonal scales",
        "moments" => "weighted mean and covariance of every component's points",
        "variance" => "expectation maximisation half-way towards the least weight variance",
        "merged" => "the two nearest components merged",
        "split" => "large components split",
        "seeded" => "components started afresh",
        "survey" => "the first proposal, from the survey",
        "earlier" => "the proposal of the round before",
        "shift" => "means only, scales those of the variables' own distribution",
        "born" => "components added where the proposal lacks mass",
        _ => "a refit of its own kind",
    }
}
