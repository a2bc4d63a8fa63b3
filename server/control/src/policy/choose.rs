//! Choosing anew: the longest hold, then the simplest ratio, realised within the bounds.

use ratewright_ratio::Fraction;

use crate::policy::funnel::{Entry, Span, funnel};
use crate::policy::outlook::Outlook;
use crate::policy::realise::{
    Allowed, Way, allowed, error_of, full_swing, nearest_single, nearest_virtual, own_error,
    realise,
};
use crate::policy::standing::Standing;
use crate::policy::{HOLD_SHARE, Limits, SAID_NOTHING};
use crate::timeline::as_double;
use crate::{CrossingDeclaration, CrossingState, Realisation, Realised};

/// What the policy looks at.
#[derive(Clone, Copy, Debug)]
pub(crate) struct View<'a> {
    pub(crate) outlook: &'a Outlook<'a>,
    pub(crate) declaration: &'a CrossingDeclaration,
    /// Velocity of the phase error under the ratio in force, samples/s.
    pub(crate) velocity: f64,
    /// What the running error of what is in force may be off by, samples: a single ratio after it
    /// would keep that.
    pub(crate) running_error: f64,
    /// Seconds from a decision to its effect.
    pub(crate) lead_s: f64,
    /// Seconds to the next decision.
    pub(crate) step_s: f64,
}

/// What was chosen, and how well it does.
#[derive(Clone, Debug, PartialEq)]
pub(crate) struct Choice {
    pub(crate) way: Way,
    /// The interval it was chosen from; twice the wanted ratio where there was none.
    pub(crate) allowed: (Fraction, Fraction),
    pub(crate) hold_s: f64,
    pub(crate) standing: Standing,
    /// True if the phase error has to be brought back first.
    pub(crate) recovers: bool,
}

impl Choice {
    /// A choice without an interval to choose from.
    fn without_room(way: Way, standing: Standing) -> Self {
        let allowed = (way.wanted, way.wanted);
        Choice {
            way,
            allowed,
            hold_s: 0.0,
            standing,
            recovers: false,
        }
    }
}

/// The setting to have from the lead on.
pub(crate) fn choose(view: &View<'_>) -> Choice {
    if view.outlook.target.certain {
        let reason = "both clocks are exact".to_owned();
        return choose_nominal(view, Standing::new(CrossingState::Holding, reason));
    }
    let limits = view.limits(view.running_error);
    if view.is_blind(&limits) {
        return view.least_bad(limits);
    }
    if view.declaration.realisation == Realisation::Stepping {
        return view.on_average();
    }
    let entry = Entry::new(view.outlook, &limits, view.lead_s, view.velocity);
    let spans = funnel(view.outlook, &limits, entry, view.step_s);
    if let Some((span, allowed)) = view.longest(&spans)
        && let Some(way) = allowed.single(&view.declaration.bounds)
        && !view.is_off()
    {
        return view.held(way, &allowed, span, entry);
    }
    match view.declaration.realisation {
        Realisation::Single => view.single(&spans, entry),
        _ => view.on_average(),
    }
}

/// The ratio of the nominal rates, held until something is measured.
pub(crate) fn choose_nominal(view: &View<'_>, standing: Standing) -> Choice {
    let nominal = view.outlook.target.nominal;
    let parts = (
        u64::try_from(*nominal.numer()),
        u64::try_from(*nominal.denom()),
    );
    let wanted = match parts {
        (Ok(numer), Ok(denom)) => Fraction::new(numer, denom),
        _ => nearest_virtual(view.outlook.target.value),
    };
    Choice::without_room(view.realise(wanted), standing)
}

impl View<'_> {
    /// The limits under what errs by up to `own_error` samples itself. A single ratio that lazy
    /// switching may have to follow leaves room for its swing.
    pub(crate) fn limits(&self, own_error: f64) -> Limits {
        let to_come = match self.declaration.realisation {
            Realisation::Lazy => full_swing(self.declaration),
            _ => 0.0,
        };
        Limits::new(
            self.declaration,
            own_error.max(to_come),
            self.outlook.sink_hz,
        )
    }

    /// The limits if nothing that is run errs by itself.
    pub(crate) fn bare_limits(&self) -> Limits {
        Limits::new(self.declaration, 0.0, self.outlook.sink_hz)
    }

    /// What is wanted, as the resampler can make it.
    fn realise(&self, wanted: Fraction) -> Way {
        realise(wanted, self.declaration, self.swing())
    }

    /// How far lazy switching may swing: no farther than the headroom leaves beside the band of the
    /// phase error when it begins.
    fn swing(&self) -> f64 {
        let full = full_swing(self.declaration);
        let outlook = self.outlook;
        let phase = outlook.extrapolate(outlook.phase, self.velocity, self.lead_s);
        let band = phase.abs() + outlook.margin(self.lead_s);
        full.min((self.declaration.headroom_samples - band).max(0.0))
    }

    fn allowed(&self, span: &Span) -> Option<Allowed> {
        allowed(self.outlook.ratio(span.low), self.outlook.ratio(span.high))
    }

    /// The first span that holds nearly as long as the longest, with its ratios.
    fn longest(&self, spans: &[Span]) -> Option<(Span, Allowed)> {
        let enough = HOLD_SHARE * spans.last()?.hold_s;
        let span = *spans.iter().find(|span| span.hold_s >= enough)?;
        Some((span, self.allowed(&span)?))
    }

    /// A choice out of a span of the funnel.
    fn held(&self, way: Way, allowed: &Allowed, span: Span, entry: Entry) -> Choice {
        let velocity = self.outlook.velocity(as_double(&way.wanted));
        let error = match way.realised {
            Realised::Single(_) => self.running_error,
            ref on_average => error_of(on_average),
        };
        Choice {
            standing: self.standing(velocity, error),
            way,
            allowed: (allowed.low, allowed.high),
            hold_s: span.hold_s,
            recovers: entry.excess > 0.0,
        }
    }

    /// One ratio at a time: the longest hold for which the bounds have a ratio.
    fn single(&self, spans: &[Span], entry: Entry) -> Choice {
        let bounds = &self.declaration.bounds;
        let way_of = |span: &Span| {
            let allowed = self.allowed(span)?;
            Some((allowed.any_single(bounds)?, allowed))
        };
        // The spans are nested, so those with a ratio come first.
        let with_ratio = spans.partition_point(|span| way_of(span).is_some());
        let last = with_ratio.checked_sub(1).map(|i| spans[i]);
        if let Some((span, (way, allowed))) = last.and_then(|span| Some((span, way_of(&span)?))) {
            return self.held(way, &allowed, span, entry);
        }
        if spans.is_empty() {
            return self.least_bad(self.limits(self.running_error));
        }
        let needed = spans.first().and_then(|span| self.allowed(span));
        let needed = needed.and_then(|needed| needed.bounds());
        let reason = "no ratio within the bounds comes near enough to the target";
        let wanted = nearest_virtual(self.outlook.target.value);
        let way = nearest_single(wanted, bounds);
        Choice::without_room(way, Standing::out_of_bounds(reason, needed))
    }

    /// True if the running error of what is in force may fill the tube: a single ratio would keep it,
    /// and what makes its ratio on average brings it within its own.
    fn is_off(&self) -> bool {
        self.running_error >= self.bare_limits().tube
    }

    /// What makes the wanted ratio on average, whose own error narrows the tube.
    fn on_average(&self) -> Choice {
        let View { declaration, .. } = self;
        let target = self.outlook.exact_target();
        let Some(error) = own_error(target, declaration) else {
            let reason = "the target is beyond every ratio within the bounds";
            let way = self.realise(nearest_virtual(self.outlook.target.value));
            return Choice::without_room(way, Standing::out_of_bounds(reason, self.needed()));
        };
        let limits = self.limits(error);
        let entry = Entry::new(self.outlook, &limits, self.lead_s, self.velocity);
        let spans = funnel(self.outlook, &limits, entry, self.step_s);
        match self.longest(&spans) {
            Some((span, allowed)) => {
                let by_itself = allowed
                    .single(&declaration.bounds)
                    .filter(|_| declaration.realisation != Realisation::Stepping);
                let way = match by_itself {
                    Some(_) if self.is_off() => self.realise(allowed.finer()),
                    Some(way) => way,
                    None => self.realise(allowed.simplest),
                };
                self.held(way, &allowed, span, entry)
            }
            None => self.least_bad(limits),
        }
    }

    /// No ratio can be vouched for: the nearest to the target that also moves the phase back.
    fn least_bad(&self, limits: Limits) -> Choice {
        let entry = Entry::new(self.outlook, &limits, self.lead_s, self.velocity);
        let velocity = self.velocity_back(&limits, entry.phase);
        let wanted = self.as_good_as(velocity);
        let standing = Standing::new(CrossingState::Degraded, self.why_not(&limits));
        let choice = Choice::without_room(self.realise(wanted), standing);
        Choice {
            recovers: true,
            ..choice
        }
    }

    /// The simplest ratio about the one that gives a velocity: what is finer than a small share of
    /// what is uncertain of it says nothing. Not one that would be run by itself and keep an error
    /// that fills the tube.
    fn as_good_as(&self, velocity: f64) -> Fraction {
        let room = SAID_NOTHING * self.outlook.velocity_deviation();
        let [low, high] = [velocity - room, velocity + room].map(|v| self.outlook.ratio(v));
        let keeps_error = |ratio: &Fraction| self.is_off() && self.declaration.bounds.allow(ratio);
        allowed(low, high)
            .map(|allowed| allowed.simplest)
            .filter(|simplest| !keeps_error(simplest))
            .unwrap_or_else(|| nearest_virtual(self.outlook.ratio(velocity)))
    }

    /// Velocity that brings a phase back in half a minute, as far as the pitch limit allows; none
    /// while it may as well be in the tube.
    fn velocity_back(&self, limits: &Limits, phase: f64) -> f64 {
        if !self.is_surely_out(limits) {
            return 0.0;
        }
        let back_s = (2.0 * self.step_s).max(30.0);
        (-phase / back_s).clamp(-limits.pitch, limits.pitch)
    }

    /// True if the band of the phase error is in the tube now.
    pub(crate) fn is_in_tube(&self) -> bool {
        let band = self.outlook.phase.abs() + self.outlook.margin(0.0);
        band <= self.limits(self.running_error).tube
    }

    /// True if uncertainty alone fills the tube: there is nothing to plan with.
    fn is_blind(&self, limits: &Limits) -> bool {
        self.outlook.margin(0.0) > limits.tube
    }

    fn is_surely_out(&self, limits: &Limits) -> bool {
        self.outlook.phase.abs() > self.outlook.margin(0.0) + limits.tube
    }

    /// True if nothing can be vouched for, as uncertainty alone fills the tube, and nothing says
    /// either that another ratio would be better: a phase that is surely out moves inward, and
    /// another one has no velocity beyond what is uncertain of it.
    pub(crate) fn is_as_good(&self, own_error: f64) -> bool {
        let limits = self.limits(own_error);
        if !self.is_blind(&limits) {
            return false;
        }
        if self.is_surely_out(&limits) {
            return self.outlook.phase * self.velocity < 0.0;
        }
        self.velocity.abs() < self.outlook.velocity_deviation()
    }

    fn why_not(&self, limits: &Limits) -> String {
        let margin = self.outlook.margin(self.lead_s);
        format!(
            "the phase error is uncertain by {margin:.3} samples when a setting could take effect, more than \
             the {:.3} that planning may use of the headroom of {}",
            limits.tube, self.declaration.headroom_samples
        )
    }
}
