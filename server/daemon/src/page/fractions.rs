//! Why a ratio was taken: the fractions around the target, in a picture and in words.

use maud::{Markup, html};
use ratewright_pictures::{Fractions, Neighbour};
use ratewright_proto::v1::{self, certificate::Proof, setting::Realisation};
use ratewright_ratio::{Bounds, Exact, Fraction, outward, residual, target_from_f64};

use super::words;

/// Fractions that are looked at; drawn are the nearest of them, and the simplest of the others.
const WALKED: usize = 4_000;
const NEAREST: usize = 80;
const SIMPLEST: usize = 160;

/// The picture and the words of a setting. `bounds` are those of its crossing, if it is still there.
pub(super) fn explained(setting: &v1::Setting, bounds: Option<&Bounds>) -> Markup {
    let Some(choice) = Choice::of(setting) else {
        return html! { p .calm { "What this setting rested on was not written down." } };
    };
    let drawn = choice.picture(bounds).draw();
    html! {
        (words::picture("fractions", &drawn))
        ul .plain #proof { @for line in choice.words() { li { (line) } } }
    }
}

/// The fractions within bounds around a target: the nearest, and the simplest of those that are
/// not much farther off.
pub(super) fn around(target: &Exact, bounds: &Bounds) -> Vec<Neighbour> {
    // Bounds on prime factors are not looked at by the walk; what breaks them is left out.
    let walked = outward(target, bounds)
        .take(WALKED)
        .filter(|ratio| bounds.allow(ratio));
    let mut found: Vec<Neighbour> = walked.map(|ratio| neighbour(&ratio, target)).collect();
    let mut simple = found.split_off(found.len().min(NEAREST));
    simple.sort_by_key(|neighbour| neighbour.m);
    simple.truncate(SIMPLEST);
    found.append(&mut simple);
    found
}

pub(super) fn neighbour(ratio: &Fraction, target: &Exact) -> Neighbour {
    Neighbour {
        l: *ratio.numer(),
        m: *ratio.denom(),
        residual: residual(ratio, target),
    }
}

/// What a setting says of its choice.
struct Choice<'a> {
    setting: &'a v1::Setting,
    evidence: &'a v1::Evidence,
    target: Exact,
    run: Vec<Neighbour>,
}

impl<'a> Choice<'a> {
    fn of(setting: &'a v1::Setting) -> Option<Self> {
        let evidence = setting.evidence.as_ref()?;
        let target = target_from_f64(evidence.target).ok()?;
        let run = run_by(setting.realisation.as_ref()?)?;
        Some(Self {
            setting,
            evidence,
            run: run.iter().map(|ratio| neighbour(ratio, &target)).collect(),
            target,
        })
    }

    fn proof(&self) -> Option<&Proof> {
        self.setting.certificate.as_ref()?.proof.as_ref()
    }

    fn bracket(&self) -> Option<(&v1::Fraction, &v1::Fraction)> {
        match self.proof()? {
            Proof::Nearest(bracket) | Proof::Neighbours(bracket) => {
                Some((bracket.below.as_ref()?, bracket.above.as_ref()?))
            }
            Proof::Simplest(_) | Proof::Stepping(_) | Proof::Uncertified(_) => None,
        }
    }

    /// (L/M) / target − 1 of a fraction of any size; none for the sentinels.
    fn off(&self, fraction: &v1::Fraction) -> Option<f64> {
        let part = |digits: &str| digits.parse::<u128>().ok().filter(|&part| part > 0);
        let (l, m) = (part(&fraction.numerator)?, part(&fraction.denominator)?);
        match (u64::try_from(l), u64::try_from(m)) {
            (Ok(l), Ok(m)) => Some(residual(&Fraction::new(l, m), &self.target)),
            _ => Some(l as f64 / m as f64 / self.evidence.target - 1.0),
        }
    }

    /// The fractions to choose from: those within the bounds; with one table of phases the phases
    /// over any advance.
    fn allowed(&self, bounds: Option<&Bounds>) -> Vec<Neighbour> {
        match (&self.setting.realisation, bounds) {
            (Some(Realisation::Stepping(stepping)), _) => {
                let advances = stepping.advance.saturating_sub(8).max(1)..=stepping.advance + 9;
                let ratios = advances.map(|advance| Fraction::new_raw(stepping.phases, advance));
                ratios
                    .map(|ratio| neighbour(&ratio, &self.target))
                    .collect()
            }
            (_, Some(bounds)) => around(&self.target, bounds),
            (_, None) => Vec::new(),
        }
    }

    fn picture(&self, bounds: Option<&Bounds>) -> Fractions {
        let e = self.evidence;
        let off = |ratio: f64| ratio / e.target - 1.0;
        let ends = |ends: (&v1::Fraction, &v1::Fraction)| self.off(ends.0).zip(self.off(ends.1));
        let held = e
            .allowed_low
            .as_ref()
            .zip(e.allowed_high.as_ref())
            .and_then(ends);
        let wanted = self
            .setting
            .wanted
            .as_ref()
            .and_then(|wanted| self.off(wanted));
        Fractions {
            title: "The fractions around the target".to_owned(),
            allowed: self.allowed(bounds),
            run: self.run.clone(),
            max_m: bounds.map(Bounds::max_m).filter(|_| !self.steps()),
            gap: self
                .bracket()
                .and_then(ends)
                .or_else(|| self.between_advances()),
            interval: Some((off(e.target_low), off(e.target_high))),
            holding: held.filter(|(low, high)| low < high),
            wanted: wanted.filter(|_| self.run.len() > 1),
        }
    }

    fn steps(&self) -> bool {
        matches!(self.setting.realisation, Some(Realisation::Stepping(_)))
    }

    /// Between two advances that follow each other there is no third.
    fn between_advances(&self) -> Option<(f64, f64)> {
        match self.run.as_slice() {
            [low, high] if self.steps() => Some((low.residual, high.residual)),
            _ => None,
        }
    }

    fn words(&self) -> Vec<Markup> {
        let mut lines = vec![self.target_words()];
        lines.extend(self.proof_words());
        lines.extend(self.turns());
        lines
    }

    fn target_words(&self) -> Markup {
        let e = self.evidence;
        let half = (e.target_high - e.target_low) / 2.0 / e.target;
        html! {
            "The target was " span .figure { (format!("{:.12}", e.target)) } ", known to \u{b1}\u{a0}"
            (words::parts(half)) " (95 %); it is at 0 in the picture."
        }
    }

    fn proof_words(&self) -> Option<Markup> {
        let e = self.evidence;
        match self.proof()? {
            Proof::Simplest(simplest) => {
                let (left, right) = (
                    simplest.left_parent.as_ref()?,
                    simplest.right_parent.as_ref()?,
                );
                Some(html! {
                    "Of the ratios that would hold for " (words::span(e.expected_hold_seconds)) ", "
                    span .figure { (self.named()) } " is the simplest: every simpler one of its kind comes \
                     from its parents " span .figure { (text(left)) " and " (text(right)) }
                    ", and neither is among them."
                })
            }
            Proof::Nearest(_) | Proof::Neighbours(_) => {
                let (below, above) = self.bracket()?;
                let gap = self
                    .off(below)
                    .zip(self.off(above))
                    .map(|(low, high)| high - low);
                Some(html! {
                    "Nothing within the bounds lies between " span .figure { (text(below)) } " and "
                    span .figure { (text(above)) }
                    @if let Some(gap) = gap { ": a gap of " (words::parts(gap)) }
                    ". Both are neighbours (their determinant is 1), and what lies between them first, the sum \
                     of their parts, is beyond the bounds."
                })
            }
            Proof::Stepping(pair) => Some(html! {
                "A table of " (pair.phases) " phases makes " span .figure { (pair.phases) "/" (pair.advance + 1) }
                " or " span .figure { (pair.phases) "/" (pair.advance) } " by two advances that follow each \
                 other; the wanted ratio lies between them, and no other two enclose it."
            }),
            Proof::Uncertified(reason) => Some(html! { "There is no short proof: " (reason) "." }),
        }
    }

    fn turns(&self) -> Option<Markup> {
        let wanted = self.setting.wanted.as_ref()?;
        let (way, bound) = match self.setting.realisation.as_ref()? {
            Realisation::Single(_) => return None,
            Realisation::Cadence(cadence) => {
                let shares = words::shares(cadence.low_blocks, cadence.high_blocks);
                (
                    format!("The two are taken in turn, {shares}"),
                    cadence.error_bound_samples,
                )
            }
            Realisation::Lazy(lazy) => {
                let way = "Each of the two is held until the running error would leave its swing";
                (way.to_owned(), lazy.swing_samples)
            }
            Realisation::Stepping(stepping) => {
                let way = "At each output one of the two advances is made";
                (way.to_owned(), stepping.error_bound_samples)
            }
        };
        Some(html! {
            (way) ": on average exactly " span .figure { (text(wanted)) }
            ", and never off by more than " (words::at_most(bound)) " output samples."
        })
    }

    fn named(&self) -> String {
        match self.setting.wanted.as_ref() {
            Some(wanted) => text(wanted),
            None => self
                .run
                .iter()
                .map(|n| format!("{}/{}", n.l, n.m))
                .collect(),
        }
    }
}

/// The ratios that a setting runs, the lower first; not in lowest terms where they are those of
/// a table of phases.
fn run_by(realisation: &Realisation) -> Option<Vec<Fraction>> {
    let pair = |cadence: &v1::Cadence| Some(vec![cadence.low?, cadence.high?]);
    let ratio = |l, m| v1::Ratio { l, m };
    let ratios = match realisation {
        Realisation::Single(single) => vec![*single],
        Realisation::Cadence(cadence) => pair(cadence)?,
        Realisation::Lazy(lazy) => pair(lazy.cadence.as_ref()?)?,
        Realisation::Stepping(stepping) => [stepping.longer_advance, stepping.advance]
            .map(|advance| ratio(stepping.phases, advance))
            .to_vec(),
    };
    let sound = ratios.iter().all(|ratio| ratio.l > 0 && ratio.m > 0);
    sound.then(|| {
        ratios
            .iter()
            .map(|ratio| Fraction::new_raw(ratio.l, ratio.m))
            .collect()
    })
}

fn text(fraction: &v1::Fraction) -> String {
    format!("{}/{}", fraction.numerator, fraction.denominator)
}
