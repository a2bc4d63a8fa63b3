//! Field masks of updates.

use prost_types::FieldMask;

use crate::refused::Violation;

/// The fields to change, out of `known`: all of them if the mask is absent, empty or `*`.
pub(super) fn fields(
    mask: Option<FieldMask>,
    known: &[&'static str],
) -> Result<Vec<&'static str>, Violation> {
    let paths = mask.map_or_else(Vec::new, |mask| mask.paths);
    if paths.is_empty() || paths == ["*"] {
        return Ok(known.to_vec());
    }
    let mut fields = Vec::with_capacity(paths.len());
    for (index, path) in paths.iter().enumerate() {
        match known.iter().find(|known| **known == path.as_str()) {
            Some(field) => fields.push(*field),
            None => {
                let field = format!("update_mask.paths[{index}]");
                return Err(Violation::new(field, format!("{path:?}"), known.join(", ")));
            }
        }
    }
    Ok(fields)
}

#[cfg(test)]
mod tests {
    use super::*;

    fn mask(paths: &[&str]) -> Option<FieldMask> {
        Some(FieldMask {
            paths: paths.iter().map(ToString::to_string).collect(),
        })
    }

    #[test]
    fn absent_and_star_mean_all() {
        for all in [None, mask(&[]), mask(&["*"])] {
            assert_eq!(fields(all, &["a", "b"]), Ok(vec!["a", "b"]));
        }
        assert_eq!(fields(mask(&["b"]), &["a", "b"]), Ok(vec!["b"]));
    }

    #[test]
    fn an_unknown_path_is_named() {
        let violation = fields(mask(&["a", "name"]), &["a", "b"]).unwrap_err();
        assert_eq!(violation.field, "update_mask.paths[1]");
        assert_eq!(violation.value, "\"name\"");
        assert_eq!(violation.accepted, "a, b");
    }
}
