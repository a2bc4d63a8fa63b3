//! A plan as a picture in a file.

use std::fs;
use std::path::{Path, PathBuf};

use clap::{Args, ValueEnum};
use ratewright_pictures::{Fractions, Neighbour, Picture, ladder};
use ratewright_ratio::allowed::{Allowed, Proof};
use ratewright_ratio::{Bounds, Certificate, Exact, Fraction, MAX_BOUND, Node, outward, residual};

use super::findings::Findings;
use super::question::Question;
use crate::failure::Failure;

/// Fractions that are looked at; drawn are the nearest of them, and the simplest of the others.
const WALKED: usize = 4_000;
const NEAREST: usize = 80;
const SIMPLEST: usize = 160;

/// What is to be drawn, and where to.
#[derive(Debug, Args)]
#[command(next_help_heading = "Picture")]
pub(crate) struct PictureWish {
    /// Draw a picture into this file, as SVG
    #[arg(long, value_name = "FILE.svg", value_parser = svg_file)]
    picture: Option<PathBuf>,
    /// What it shows
    #[arg(
        long,
        value_name = "WHAT",
        default_value = "ladder",
        requires = "picture"
    )]
    picture_of: Subject,
}

/// What a picture can show.
#[derive(Clone, Copy, Debug, ValueEnum)]
enum Subject {
    /// What a larger filter bank buys: error against size
    Ladder,
    /// The fractions around the target, the best, and the gap that proves it
    Fractions,
}

fn svg_file(text: &str) -> Result<PathBuf, String> {
    let path = PathBuf::from(text);
    let ending = path.extension().map(|ending| ending.to_ascii_lowercase());
    match ending {
        Some(ending) if ending == "svg" => Ok(path),
        _ => Err("accepted are files that end in .svg, such as plan.svg".to_owned()),
    }
}

impl PictureWish {
    /// Draws the picture, if one is wished for.
    pub(super) fn draw(&self, question: &Question, findings: &Findings) -> Result<(), Failure> {
        let Some(path) = &self.picture else {
            return Ok(());
        };
        let picture = match self.picture_of {
            Subject::Ladder => ladder(&rungs(findings)),
            Subject::Fractions => fractions(question, findings).draw(),
        };
        write(path, &picture)
    }
}

fn write(path: &Path, picture: &Picture) -> Result<(), Failure> {
    fs::write(path, picture.file())
        .map_err(|error| Failure::Failed(format!("{} cannot be written: {error}", path.display())))
}

fn rungs(findings: &Findings) -> Vec<Neighbour> {
    let ladder = &findings.answer.ladder;
    let rung = |rung: &ratewright_ratio::Rung| neighbour(&rung.last(), rung.last_residual);
    ladder.iter().map(rung).collect()
}

fn neighbour(ratio: &Fraction, residual: f64) -> Neighbour {
    Neighbour {
        l: *ratio.numer(),
        m: *ratio.denom(),
        residual,
    }
}

fn fractions(question: &Question, findings: &Findings) -> Fractions {
    let answer = &findings.answer;
    let bounds = match &question.allowed {
        Allowed::Bounded(bounds) => Some(bounds),
        _ => None,
    };
    Fractions {
        title: "The fractions around the target".to_owned(),
        // With other limits: those of the ladder.
        allowed: match bounds {
            Some(bounds) => around(&answer.target, bounds),
            None => rungs(findings),
        },
        run: vec![neighbour(&answer.best, answer.residual)],
        max_m: bounds.map(Bounds::max_m).filter(|&max_m| max_m < MAX_BOUND),
        gap: gap(&answer.proof, &answer.target),
        interval: findings.width.as_ref().map(|width| {
            let target = value(&answer.target);
            let off = |end: &Exact| value(end) / target - 1.0;
            (off(&width.low), off(&width.high))
        }),
        holding: None,
        wanted: None,
    }
}

fn value(exact: &Exact) -> f64 {
    *exact.numer() as f64 / *exact.denom() as f64
}

/// The fractions within bounds around a target: the nearest, and the simplest of those that are
/// not much farther off.
fn around(target: &Exact, bounds: &Bounds) -> Vec<Neighbour> {
    // The walk takes no heed of bounds on prime factors.
    let walked = outward(target, bounds)
        .take(WALKED)
        .filter(|ratio| bounds.allow(ratio));
    let mut found: Vec<Neighbour> = walked
        .map(|ratio| neighbour(&ratio, residual(&ratio, target)))
        .collect();
    let mut simple = found.split_off(found.len().min(NEAREST));
    simple.sort_by_key(|neighbour| neighbour.m);
    simple.truncate(SIMPLEST);
    found.append(&mut simple);
    found
}

/// The residuals of the bracket's ends, where both are fractions.
fn gap(proof: &Proof, target: &Exact) -> Option<(f64, f64)> {
    let Proof::Direct(Certificate::Nearest(bracket)) = proof else {
        return None;
    };
    let off = |node: Node| {
        let proper = node.l > 0 && node.m > 0;
        proper.then(|| residual(&Fraction::new_raw(node.l, node.m), target))
    };
    off(bracket.below).zip(off(bracket.above))
}
