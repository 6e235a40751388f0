//! Instance paths, made only for those who want to read one.

/// Walks up from a context by its callers, and gives the dotted paths of its instances: at most `limit`, and whether those are
/// all. `above` gives a context's callers, each with the name of the instance statement; a top has none.
pub fn all<'n>(start: u32, limit: usize, above: impl Fn(u32) -> Vec<(u32, &'n str)>) -> (Vec<String>, bool) {
    let mut paths = Vec::new();
    let mut stack = vec![(start, String::new())];
    while let Some((here, below)) = stack.pop() {
        if paths.len() == limit {
            return (paths, false);
        }
        let callers = above(here);
        if callers.is_empty() {
            paths.push(below);
            continue;
        }
        for (caller, name) in callers.into_iter().rev() {
            let path = if below.is_empty() { name.to_owned() } else { format!("{name}.{below}") };
            stack.push((caller, path));
        }
    }
    (paths, true)
}
