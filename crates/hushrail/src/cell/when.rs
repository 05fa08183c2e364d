//! Conditions on pins, as leakage tables and state weights give them.

use std::collections::BTreeMap;

/// Pins a condition fixes: name and value. `None` when the text is not a product of pins.
pub fn product_term(when: &str) -> Option<BTreeMap<String, bool>> {
    let mut pins = BTreeMap::new();
    let text = when.replace(['(', ')', ' '], "");
    if text.is_empty() {
        return Some(pins);
    }
    for factor in text.split(['&', '*']) {
        let (name, value) = match factor.strip_prefix('!') {
            Some(n) => (n, false),
            None => match factor.strip_suffix('\'') {
                Some(n) => (n, false),
                None => (factor, true),
            },
        };
        if name.is_empty() || !name.bytes().all(|b| b.is_ascii_alphanumeric() || b"_[]".contains(&b)) {
            return None;
        }
        pins.insert(name.to_owned(), value);
    }
    Some(pins)
}

#[cfg(test)]
mod tests {
    use super::product_term;

    #[test]
    fn products_of_pins_are_understood_and_nothing_else() {
        let pins = product_term("!A1 & B[0]").expect("a product");
        assert_eq!((pins["A1"], pins["B[0]"]), (false, true));
        assert!(!product_term("A'*B").expect("a product")["A"]);
        assert!(product_term("").expect("any state").is_empty());
        for bad in ["A|B", "A&", "!", "A^B", "A+B"] {
            assert_eq!(product_term(bad), None, "{bad}");
        }
    }
}
