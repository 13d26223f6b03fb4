//! Radial tails: how much of the target, and of each proposal, lies further out than a distance.

use super::Drawing;
use super::Style;
use super::axis::Scale;
use super::canvas::Pen;
use super::colour::INK;
use super::contestants::Look;
use super::contestants::look;
use super::frame::Frame;
use super::frame::SINGLE;
use super::frame::Side;
use super::key::Sample;
use super::numbers::significant;
use super::table::Table;
use crate::numeric::exp;

/// What the figure shows.
#[derive(Debug, Clone, PartialEq)]
pub struct RadialData {
    /// How distances are measured: "distance from the centre (standard deviations)".
    pub distance: String,
    /// The target, from weighted draws.
    pub target: RadialTail,
    /// The proposals, in order.
    pub proposals: Vec<RadialTail>,
}

/// A distribution of distances.
#[derive(Debug, Clone, PartialEq)]
pub struct RadialTail {
    /// What it is called.
    pub name: String,
    /// Distances, rising.
    pub distance: Vec<f64>,
    /// `ln P(distance > r)` for each, in nats.
    pub log_survival: Vec<f64>,
}

impl RadialTail {
    /// What logarithmic axes can show: distance and survival.
    fn points(&self) -> impl Iterator<Item = (f64, f64)> {
        let pairs = self.distance.iter().copied().zip(self.log_survival.iter().map(|&log| exp(log)));
        pairs.filter(|&(r, share)| r > 0.0 && r.is_finite() && share > 1e-250 && share <= 1.0 + 1e-9)
    }

    /// `ln P(distance > r)` between two of the given distances, `None` outside of them.
    fn log_survival_at(&self, r: f64) -> Option<f64> {
        let next = self.distance.iter().position(|&at| at >= r)?;
        if self.distance[next] == r {
            return self.log_survival.get(next).copied();
        }
        let before = next.checked_sub(1)?;
        let (a, b) = (self.distance[before], self.distance[next]);
        let (low, high) = (self.log_survival.get(before)?, self.log_survival.get(next)?);
        Some(low + (high - low) * (r - a) / (b - a))
    }
}

/// Draws the figure.
#[must_use]
pub fn draw(data: &RadialData, style: &Style) -> Drawing {
    let ends = |points: &mut dyn Iterator<Item = f64>| {
        points.fold((f64::INFINITY, 0.0_f64), |(low, high), v| (low.min(v), high.max(v)))
    };
    let tails = || std::iter::once(&data.target).chain(&data.proposals);
    let target = ends(&mut data.target.points().map(|p| p.1));
    // One power of ten below the target's last point: beyond, there is nothing to compare with.
    let least = if target.0 > target.1 { 1e-4 } else { target.0.min(0.1) / 10.0 };
    // Nearer than where a tenth has been left behind, all are alike.
    let far = ends(&mut tails().flat_map(|tail| tail.points().filter(|p| (least..=0.9).contains(&p.1)).map(|p| p.0)));
    let far = if far.0 > far.1 { (0.1, 10.0) } else { far };
    let entries: Vec<(Sample, String)> = tails()
        .enumerate()
        .map(|(k, tail)| {
            // Proposals look as in the other figures; the target is ink.
            let sample = match k.checked_sub(1) {
                None => Sample::Marker(inked(style), 0.8 * style.marker()),
                Some(k) => Sample::Line(look(k, style).pen),
            };
            (sample, tail.name.clone())
        })
        .collect();
    let x = Side { name: &data.distance, unit: None, range: (far.0, far.1, Scale::Log) };
    let y = Side { name: "share further out", unit: None, range: (least, 1.0, Scale::Log) };
    let mut frame = Frame::new(&x, &[(y, SINGLE)], &entries, style);
    for (k, proposal) in data.proposals.iter().enumerate() {
        frame.curve(0, proposal.points(), look(k, style).pen);
    }
    let look = inked(style);
    let mut last: Option<(f64, f64)> = None;
    for (r, share) in data.target.points().filter(|&(r, share)| frame.panels[0].shows(r, share)) {
        let spot = frame.panels[0].spot(r, share);
        // Markers keep a little apart.
        if last.is_none_or(|(x, y)| (spot.0 - x).abs() + (spot.1 - y).abs() > 0.5 * style.unit()) {
            look.shape.draw(&mut frame.canvas, spot, 0.8 * style.marker(), look.pen.colour);
            last = Some(spot);
        }
    }
    if tails().all(|tail| tail.points().next().is_none()) {
        frame.say(0, "no distance");
    }
    frame.finish("radial-tails", caption(data), table(data))
}

/// The look of the target.
fn inked(style: &Style) -> Look {
    let look = look(0, style);
    Look { pen: Pen { colour: INK, ..look.pen }, ..look }
}

fn caption(data: &RadialData) -> String {
    // Where a proposal ends there is nothing to compare with.
    let ends = data.proposals.iter().filter_map(|proposal| proposal.points().last().map(|p| p.0));
    let end = ends.fold(f64::INFINITY, f64::min);
    let mut caption =
        format!("Share of {} (markers) and of the proposals (lines) further out than a distance.", data.target.name);
    let Some((r, share)) = data.target.points().filter(|p| p.0 <= end).last() else { return caption };
    let ratios: Vec<String> = data
        .proposals
        .iter()
        .filter_map(|proposal| {
            let ratio = exp(proposal.log_survival_at(r)? - crate::numeric::ln(share));
            Some(format!("{} {} times as much", proposal.name, significant(ratio, 2)))
        })
        .collect();
    if !ratios.is_empty() {
        caption.push_str(&format!(
            " Beyond {}, where {} has {} of its mass, lies: {}. A proposal \
             whose line dips below the markers has tails too light for bounded weights.",
            significant(r, 3),
            data.target.name,
            significant(share, 2),
            ratios.join("; ")
        ));
    }
    caption
}

fn table(data: &RadialData) -> Table {
    let mut table = Table::new(&["distribution", "distance", "log_survival"]);
    for tail in std::iter::once(&data.target).chain(&data.proposals) {
        for (&r, &log) in tail.distance.iter().zip(&tail.log_survival) {
            let finite = log.is_finite().then_some(log);
            table.push([tail.name.as_str().into(), r.into(), finite.into()]);
        }
    }
    table
}

#[cfg(test)]
mod tests {
    use super::super::checks;
    use super::*;

    /// `P(R > r) = (1 + r^2 / df)^(-df / 2)`, a Student t in the plane; `exp(-r^2 / 2)` for `df = inf`.
    fn tail(name: &str, df: f64, scale: f64, steps: u32, far: f64) -> RadialTail {
        let distance: Vec<f64> = (1..=steps).map(|i| far * f64::from(i) / f64::from(steps)).collect();
        let log = |r: &f64| {
            let z = (r / scale) * (r / scale);
            if df.is_finite() { -0.5 * df * libm::log1p(z / df) } else { -0.5 * z }
        };
        let log_survival = distance.iter().map(log).collect();
        RadialTail { name: name.to_owned(), distance, log_survival }
    }

    fn data(target: RadialTail, proposals: Vec<RadialTail>) -> RadialData {
        RadialData { distance: "distance from the centre (standard deviations)".into(), target, proposals }
    }

    #[test]
    fn tails_of_every_kind_are_drawn_in_order() {
        let target = tail("the target", 7.0, 1.0, 60, 9.0);
        let lines = vec![
            tail("tuned, 6 degrees of freedom", 6.0, 1.05, 90, 30.0),
            tail("Gaussian", f64::INFINITY, 1.1, 90, 30.0),
        ];
        let mut broken = target.clone();
        broken.log_survival[3] = f64::NEG_INFINITY;
        broken.distance[5] = f64::NAN;
        let none = RadialTail { name: "none".into(), distance: vec![], log_survival: vec![] };
        let cases = [
            ("two", data(target.clone(), lines.clone())),
            ("broken", data(broken, lines[1..].to_vec())),
            ("thin", data(tail("thin", f64::INFINITY, 1.0, 400, 30.0), vec![])),
            ("none", data(none.clone(), vec![none])),
        ];
        for (name, data) in cases {
            checks::check(&format!("radial-{name}"), |style| vec![draw(&data, style)]);
        }
    }

    /// At the target's last distance, 9, a Gaussian of scale 1.1 has exp(-33.47) against (1 + 81/7)^-3.5.
    #[test]
    fn the_caption_compares_where_the_target_ends() {
        let target = tail("the target", 7.0, 1.0, 60, 9.0);
        let data = data(target, vec![tail("Gaussian", f64::INFINITY, 1.1, 3000, 30.0)]);
        let ratio = libm::exp(-0.5 * 81.0 / 1.21) * libm::pow(1.0 + 81.0 / 7.0, 3.5);
        let want = format!("Gaussian {} times as much", significant(ratio, 2));
        assert!(caption(&data).contains(&want), "{} {want}", caption(&data));
    }
}
