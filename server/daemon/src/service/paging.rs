//! Pages of lists. A page token holds where the page before ended; callers must not read it.

use crate::{convert::names::quoted, digest::fnv1a, refused::Violation};

const DEFAULT_SIZE: usize = 100;
const LARGEST_SIZE: usize = 1_000;

/// The page that a call asks for.
#[derive(Debug, PartialEq, Eq)]
pub(super) struct Page {
    pub(super) size: usize,
    /// What the page before ended with; absent for the first page.
    pub(super) after: Option<String>,
}

impl Page {
    /// Cuts what was found, one more than the page takes if there is more, and gives the token of
    /// the next page, empty if this is the last. `end` is what a page ending with an item is
    /// known by.
    pub(super) fn cut<T>(
        &self,
        list: &str,
        mut found: Vec<T>,
        end: impl Fn(&T) -> String,
    ) -> (Vec<T>, String) {
        let more = found.len() > self.size;
        found.truncate(self.size);
        let next = match found.last() {
            Some(last) if more => token(list, &end(last)),
            _ => String::new(),
        };
        (found, next)
    }
}

/// Checks what a call sent. `list` tells lists apart: a token of one is no token of another.
pub(super) fn page(list: &str, page_size: i32, page_token: &str) -> Result<Page, Violation> {
    let size = match usize::try_from(page_size) {
        Ok(0) => DEFAULT_SIZE,
        Ok(size) => size.min(LARGEST_SIZE),
        Err(_) => {
            let accepted = "0 (for 100) to 1000; more is taken as 1000";
            return Err(Violation::new("page_size", page_size, accepted));
        }
    };
    if page_token.is_empty() {
        return Ok(Page { size, after: None });
    }
    let after = read(list, page_token).ok_or_else(|| {
        let accepted = "the next_page_token of the page before, of the same list";
        Violation::new("page_token", quoted(page_token), accepted)
    })?;
    Ok(Page {
        size,
        after: Some(after),
    })
}

/// The token of a page that goes on after `after`.
fn token(list: &str, after: &str) -> String {
    let mut token = format!("{:016x}", seal(list, after));
    token.extend(after.bytes().map(|byte| format!("{byte:02x}")));
    token
}

fn seal(list: &str, after: &str) -> u64 {
    fnv1a(format!("{list}\n{after}").as_bytes())
}

fn read(list: &str, token: &str) -> Option<String> {
    let (sealed, hex) = token.split_at_checked(16)?;
    let byte = |index: usize| u8::from_str_radix(hex.get(index..index + 2)?, 16).ok();
    let bytes = (0..hex.len())
        .step_by(2)
        .map(byte)
        .collect::<Option<Vec<u8>>>()?;
    let after = String::from_utf8(bytes).ok()?;
    (token == self::token(list, &after) && sealed.len() == 16).then_some(after)
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn a_token_is_read_back_by_its_own_list_only() {
        let token = token("clocks", "desk-9");
        let wanted = Page {
            size: 100,
            after: Some("desk-9".into()),
        };
        assert_eq!(page("clocks", 0, &token), Ok(wanted));
        assert_eq!(
            page("crossings", 0, &token).unwrap_err().field,
            "page_token"
        );
    }

    #[test]
    fn only_a_page_with_more_behind_it_has_a_token() {
        let page = Page {
            size: 2,
            after: None,
        };
        let cut = |found: Vec<u8>| page.cut("numbers", found, u8::to_string);
        assert_eq!(cut(vec![]), (vec![], String::new()));
        assert_eq!(cut(vec![1, 2]), (vec![1, 2], String::new()));
        assert_eq!(cut(vec![1, 2, 3]), (vec![1, 2], token("numbers", "2")));
    }

    #[test]
    fn a_made_up_token_is_refused() {
        let good = token("clocks", "desk");
        let flipped = good.replacen('6', "7", 1);
        for sent in ["desk", "zz", "ü", &good[1..], &flipped, &format!("{good}0")] {
            assert!(page("clocks", 0, sent).is_err(), "{sent}");
        }
    }

    #[test]
    fn sizes_are_bounded() {
        let size = |sent| page("clocks", sent, "").map(|page| page.size);
        assert_eq!(
            (size(0), size(7), size(i32::MAX)),
            (Ok(100), Ok(7), Ok(1000))
        );
        let negative = size(-1).unwrap_err();
        assert_eq!(
            (negative.field.as_str(), negative.value.as_str()),
            ("page_size", "-1")
        );
    }
}
