//! Names with stars.

/// Whether `name` fits a pattern in which `*` stands for any run of characters.
pub fn fits_pattern(pattern: &str, name: &str) -> bool {
    let mut parts = pattern.split('*');
    let Some(first) = parts.next() else { return name.is_empty() };
    let Some(mut rest) = name.strip_prefix(first) else { return false };
    let parts: Vec<&str> = parts.collect();
    if parts.is_empty() {
        return rest.is_empty();
    }
    for (i, p) in parts.iter().enumerate() {
        if i + 1 == parts.len() {
            return rest.ends_with(p);
        }
        match rest.find(p) {
            Some(at) => rest = &rest[at + p.len()..],
            None => return false,
        }
    }
    true
}

#[cfg(test)]
mod tests {
    use super::fits_pattern;

    #[test]
    fn stars_stand_for_any_run() {
        for (p, n, want) in [
            ("fill*", "fill_2", true),
            ("*decap*", "ef_decap_12", true),
            ("inv_1", "inv_1", true),
            ("inv_1", "inv_12", false),
            ("*", "x", true),
            ("a*b*c", "a1b2c", true),
            ("a*b*c", "a1c", false),
        ] {
            assert_eq!(fits_pattern(p, n), want, "{p} {n}");
        }
    }
}
