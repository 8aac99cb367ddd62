//! The grid and play that `new` writes.
//!
//! Contract: both pass every check as they stand; a test reads them.

/// Name and text of each starter file; the play refers to the grid by its name.
pub const FILES: [(&str, &str); 2] = [
    ("starter.grid.toml", include_str!("starter/starter.grid.toml")),
    ("starter.play.toml", include_str!("starter/starter.play.toml")),
];

#[cfg(test)]
mod tests {
    use super::*;
    use crate::case::{parse_grid, parse_play};

    #[test]
    fn starter_files_pass_their_checks() {
        let [(grid_name, grid_text), (play_name, play_text)] = FILES;
        let grid = parse_grid(grid_text, grid_name).expect("the starter grid is right");
        let play = parse_play(play_text, play_name, &grid).expect("the starter play is right");
        assert_eq!((grid.areas.len(), play.events.len(), play.name.as_str()), (2, 2, "starter"));
        assert!(play_text.contains(grid_name));
    }

    #[test]
    fn starter_remarks_are_keys_that_exist() {
        let [(grid_name, grid_text), _] = FILES;
        let uncommented = grid_text
            .lines()
            .map(|line| match line.strip_prefix("# ") {
                Some(rest) if rest.contains(" = ") => rest,
                _ => line,
            })
            .collect::<Vec<_>>()
            .join("\n");
        assert!(
            uncommented.contains("\non_silence = ") && uncommented.contains("\nschedule_mw = ")
        );
        parse_grid(&uncommented, grid_name).expect("every remarked key is one");
    }
}
