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
        let ratios = match setting.realisation.as_ref()? {
            Realisation::Single(single) => vec![*single],
            Realisation::Cadence(cadence) => vec![cadence.low?, cadence.high?],
        };
        let run = ratios.iter().map(|ratio| {
            let both = ratio.l > 0 && ratio.m > 0;
            both.then(|| neighbour(&Fraction::new(ratio.l, ratio.m), &target))
        });
        Some(Self {
            setting,
            evidence,
            target,
            run: run.collect::<Option<_>>()?,
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
            Proof::Simplest(_) | Proof::Uncertified(_) => None,
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
            allowed: bounds.map_or_else(Vec::new, |bounds| around(&self.target, bounds)),
            run: self.run.clone(),
            max_m: bounds.map(Bounds::max_m),
            gap: self.bracket().and_then(ends),
            interval: Some((off(e.target_low), off(e.target_high))),
            holding: held.filter(|(low, high)| low < high),
            wanted: wanted.filter(|_| self.run.len() > 1),
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
            Proof::Uncertified(reason) => Some(html! { "There is no short proof: " (reason) "." }),
        }
    }

    fn turns(&self) -> Option<Markup> {
        let Some(Realisation::Cadence(cadence)) = &self.setting.realisation else {
            return None;
        };
        let wanted = self.setting.wanted.as_ref()?;
        Some(html! {
            "The two are taken in turn, " (words::shares(cadence.low_blocks, cadence.high_blocks))
            ": on average exactly " span .figure { (text(wanted)) }
            ", and never off by more than " (words::small(cadence.error_bound_samples)) " output samples."
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

fn text(fraction: &v1::Fraction) -> String {
    format!("{}/{}", fraction.numerator, fraction.denominator)
}
