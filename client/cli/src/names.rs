//! Names that do not exist, and the ones that may have been meant.

use ratewright_client::{CallError, Client, Id, RefusalKind};

use crate::failure::Failure;

/// Most names that are offered.
const OFFERED: usize = 3;

/// A call that spoke of these crossings failed. If one of them does not exist, says so, and which
/// may have been meant.
pub(crate) async fn crossings(client: &Client, wanted: &[Id], error: CallError) -> Failure {
    if !error.is(RefusalKind::NotFound) {
        return error.into();
    }
    let Ok(there) = client.crossings().await else {
        return error.into();
    };
    let names: Vec<&str> = there
        .iter()
        .map(|crossing| crossing.declaration.id.as_str())
        .collect();
    let unknown = wanted.iter().find(|id| !names.contains(&id.as_str()));
    match unknown {
        Some(id) => Failure::Failed(unknown_of("crossing", id.as_str(), &names)),
        None => error.into(),
    }
}

/// The clocks that may have been meant by a name: `meant may be desk`; `None` if no name is near.
pub(crate) async fn clocks_like(client: &Client, wanted: &Id) -> Option<String> {
    let there = client.clocks().await.ok()?;
    let names: Vec<&str> = there
        .iter()
        .map(|clock| clock.declaration.id.as_str())
        .collect();
    let near = near(wanted.as_str(), &names);
    (!near.is_empty()).then(|| format!("meant may be {}", joined(&near)))
}

/// What to say of a name that does not exist, `names` being all that do.
fn unknown_of(kind: &str, wanted: &str, names: &[&str]) -> String {
    if names.is_empty() {
        return format!("there is no {kind} {wanted}, and no other {kind} is declared");
    }
    let near = near(wanted, names);
    if !near.is_empty() {
        return format!(
            "there is no {kind} {wanted}; meant may be {}",
            joined(&near)
        );
    }
    let some = joined(&names[..names.len().min(OFFERED)]);
    match names.len() {
        0..=OFFERED => format!("there is no {kind} {wanted}; there is {some}"),
        all => format!(
            "there is no {kind} {wanted}; `ratewright standing` lists all {all}, such as {some}"
        ),
    }
}

/// The names that take few slips of the finger to become `wanted`, or of which it is a part; the
/// nearest first.
fn near<'n>(wanted: &str, names: &[&'n str]) -> Vec<&'n str> {
    let most = (wanted.len() / 3).max(2);
    let mut near: Vec<(usize, &str)> = names
        .iter()
        .map(|&name| (strsim::damerau_levenshtein(wanted, name), name))
        .filter(|(slips, name)| *slips <= most.min(name.len() / 2) || name.contains(wanted))
        .collect();
    near.sort_unstable();
    near.truncate(OFFERED);
    near.into_iter().map(|(_, name)| name).collect()
}

/// `a`, `a or b`, `a, b or c`.
fn joined(names: &[&str]) -> String {
    match names {
        [] => String::new(),
        [only] => (*only).to_owned(),
        [first @ .., last] => format!("{} or {last}", first.join(", ")),
    }
}

#[cfg(test)]
mod tests {
    use super::*;

    const NAMES: [&str; 5] = [
        "film",
        "hall-to-ferry",
        "hall-to-van",
        "news",
        "van-to-hall",
    ];

    #[test]
    fn slips_of_the_finger_find_their_name() {
        for (typed, meant) in [
            ("hal-to-van", "hall-to-van"),
            ("hall-to-vna", "hall-to-van"),
            ("flim", "film"),
            ("ferry", "hall-to-ferry"),
        ] {
            assert_eq!(near(typed, &NAMES).first(), Some(&meant), "{typed}");
        }
        assert_eq!(near("gramophone", &NAMES), [""; 0]);
    }

    #[test]
    fn what_is_said_names_what_exists() {
        let said = |wanted: &str, names: &[&str]| unknown_of("crossing", wanted, names);
        assert_eq!(
            said("flim", &NAMES),
            "there is no crossing flim; meant may be film"
        );
        assert_eq!(
            said("gramophone", &NAMES),
            "there is no crossing gramophone; `ratewright standing` lists all 5, such as film, \
             hall-to-ferry or hall-to-van"
        );
        assert_eq!(
            said("gramophone", &NAMES[..1]),
            "there is no crossing gramophone; there is film"
        );
        assert_eq!(
            said("film", &[]),
            "there is no crossing film, and no other crossing is declared"
        );
    }
}
