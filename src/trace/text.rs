//! Lines and places in a text.

/// The lines of a text with their numbers from 1, without their ends, whatever ends them (LF,
/// CR LF, or CR alone).
pub(super) fn numbered_lines(text: &str) -> impl Iterator<Item = (usize, &str)> + Clone {
    let end = if text.contains('\n') { '\n' } else { '\r' };
    let lines = text
        .split(end)
        .map(|line| line.strip_suffix('\r').unwrap_or(line));
    lines.enumerate().map(|(i, line)| (i + 1, line))
}

/// Character of the line, counted from 1, at a byte.
pub(super) fn character(line: &str, byte: usize) -> usize {
    line[..byte].chars().count() + 1
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn every_line_end_is_one() {
        let lines = |text| numbered_lines(text).collect::<Vec<_>>();
        assert_eq!(lines("a\r\nb\n"), [(1, "a"), (2, "b"), (3, "")]);
        assert_eq!(lines("a\rb"), [(1, "a"), (2, "b")]);
        assert_eq!(character("µm x", 3), 3);
    }
}
