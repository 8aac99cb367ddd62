//! From arguments to a plan: grid, division, forms, ratings, outages, notes.

use super::super::Failure;
use super::{Args, OutageSet, failure};
use crate::case::builtin_grid;
use crate::case::model::Grid;
use crate::divide::{DivideError, Settings, divide};
use crate::sweep::closed::{ClosedLoop, loop_scheme};
use crate::sweep::outage::{self, Outage};
use crate::sweep::prepare::{Prepared, divided, prepare, with_feeders};
use crate::sweep::run::{Mode, Plan};
use crate::sweep::screen::{WHY_SAFE, pairs};
use crate::sweep::{Balancing, Form};

/// A plan with what has to be said about it.
pub(super) struct Setup {
    pub(super) plan: Plan,
    pub(super) grid_name: String,
    pub(super) notes: Vec<String>,
}

impl Setup {
    /// Make it.
    ///
    /// Errors: a grid that can not be read, divided or swept as asked.
    pub(super) fn new(args: &Args) -> Result<Setup, Failure> {
        check_numbers(args)?;
        let mut notes = Vec::new();
        let (grid, open) = read_and_divide(args, &mut notes)?;
        let grid = with_feeders(&grid, args.feeders / 100.0);
        note_feeders(&grid, args, &mut notes);
        let mut forms = vec![(Form::AsItIs, grid.clone())];
        if let Some(open) = open {
            forms.push((Form::Divided, divided(&grid, &open)));
        }
        let mut cases = prepare(&forms, &args.rating_factor).map_err(failure)?;
        let wanted: Vec<Form> = args.form.iter().map(|&f| Form::from(f)).collect();
        if let Some(missing) = wanted.iter().find(|w| forms.iter().all(|(f, _)| f != *w)) {
            return Err(Failure::Input(format!(
                "there is no {} form: the grid has one area; propose areas with --areas 2 or more",
                missing.word()
            )));
        }
        cases.retain(|c| wanted.is_empty() || wanted.contains(&c.form));
        if !args.rating_factor.is_empty() {
            notes.push("Ratings: the factor times the largest base flow of the line over the forms, at least the factor times 5 % of the largest flow of all; the same for every form.".to_owned());
        }
        let schemes = schemes(args)?;
        let outages = outages(args, &cases, &schemes, &mut notes)?;
        let mode = match args.closed_loop {
            true => Mode::Closed(ClosedLoop { duration_s: args.seconds, ..ClosedLoop::default() }),
            false => Mode::Static,
        };
        note_schemes(&schemes, args, &mut notes);
        Ok(Setup { plan: Plan { cases, schemes, outages, mode }, grid_name: grid.name, notes })
    }
}

fn check_numbers(args: &Args) -> Result<(), Failure> {
    if let Some(bad) = args.rating_factor.iter().find(|f| !(f.is_finite() && **f > 0.0)) {
        return Err(Failure::Input(format!("--rating-factor {bad}: must be above 0, e.g. 1.5")));
    }
    if !(0.0..=100.0).contains(&args.feeders) {
        return Err(Failure::Input(format!("--feeders {}: must be from 0 to 100", args.feeders)));
    }
    if !(args.seconds >= 10.0 && args.seconds <= 3600.0) {
        return Err(Failure::Input(format!("--seconds {}: must be from 10 to 3600", args.seconds)));
    }
    Ok(())
}

/// The grid with its areas, and the ties its division leaves open.
fn read_and_divide(
    args: &Args,
    notes: &mut Vec<String>,
) -> Result<(Grid, Option<Vec<usize>>), Failure> {
    let grid = match &args.grid {
        None => builtin_grid(),
        Some(path) => crate::case::read_grid(path)
            .map_err(|problems| super::super::check::input_failure(&problems))?,
    };
    let settings = Settings { areas: args.areas, outages_max: 0, ..Settings::default() };
    match divide(&grid, &settings, &mut |_| true) {
        Ok(division) => {
            let open = division.choices.best.first().map(|c| c.opened.clone()).unwrap_or_default();
            let names: Vec<&str> = open.iter().map(|&l| grid.lines[l].name.as_str()).collect();
            notes.push(match names.is_empty() {
                true => "Divided: the areas form a tree already, no tie is opened.".to_owned(),
                false => format!("Divided: ties left open are {}.", names.join(", ")),
            });
            Ok((division.grid, Some(open)))
        }
        Err(DivideError::OneArea) => {
            notes
                .push("One area: there is no divided form; propose areas with --areas.".to_owned());
            Ok((grid, None))
        }
        Err(why) => Err(Failure::Input(why.to_string())),
    }
}

fn note_feeders(grid: &Grid, args: &Args, notes: &mut Vec<String>) {
    if grid.feeders.is_empty() {
        notes.push("No feeder can be shed: what the stewards can not meet is left to protection. Add feeders to the file, or --feeders 100.".to_owned());
    } else if args.feeders > 0.0 {
        notes.push(format!(
            "Where the file lists no feeder, {} % of every load can be shed.",
            args.feeders
        ));
    }
}

fn schemes(args: &Args) -> Result<Vec<Balancing>, Failure> {
    let mut schemes: Vec<Balancing> = args.scheme.iter().map(|&s| s.into()).collect();
    if args.forecast {
        schemes = vec![Balancing::Steward];
    } else if schemes.is_empty() && args.closed_loop {
        schemes = vec![Balancing::Steward, Balancing::AreaControlError, Balancing::Droop];
    } else if schemes.is_empty() {
        schemes = Balancing::ALL.to_vec();
    }
    if args.closed_loop {
        for &scheme in &schemes {
            loop_scheme(scheme).map_err(failure)?;
        }
    }
    Ok(schemes)
}

fn outages(
    args: &Args,
    cases: &[Prepared],
    schemes: &[Balancing],
    notes: &mut Vec<String>,
) -> Result<Vec<(Form, Vec<Outage>)>, Failure> {
    let mut out = Vec::new();
    let stewards = schemes.contains(&Balancing::Steward);
    for form in [Form::AsItIs, Form::Divided] {
        let of_form: Vec<&Prepared> = cases.iter().filter(|c| c.form == form).collect();
        let Some(first) = of_form.first() else { continue };
        let mut list = match (args.pairs, args.outages) {
            (true, _) => {
                let screened = pairs(&of_form, stewards)
                    .map_err(|e| Failure::Input(format!("cannot screen pairs: {e}")))?;
                notes.push(format!(
                    "Pairs of lines, {}: {} looked at, {} screened out ({WHY_SAFE}).",
                    form.word(),
                    screened.looked_at,
                    screened.screened_out()
                ));
                screened.pairs
            }
            (false, OutageSet::All) => outage::singles(&first.grid),
            (false, OutageSet::Lines) => outage::lines(&first.grid),
            (false, OutageSet::Units) => outage::units(&first.grid),
        };
        if let Some(name) = &args.only {
            list.retain(|o| o.name(&first.grid) == *name);
        }
        out.push((form, list));
    }
    match &args.only {
        Some(name) if out.iter().all(|(_, list)| list.is_empty()) => Err(unknown(name, cases)),
        _ => Ok(out),
    }
}

fn unknown(name: &str, cases: &[Prepared]) -> Failure {
    let known: Vec<String> = cases
        .first()
        .map(|c| outage::singles(&c.grid).into_iter().map(|o| o.name(&c.grid)).collect())
        .unwrap_or_default();
    let shared = |k: &String| k.chars().zip(name.chars()).take_while(|(a, b)| a == b).count();
    let near = known.iter().max_by_key(|k| shared(k));
    Failure::Input(format!(
        "no outage is called `{name}`{}",
        near.map_or(String::new(), |n| format!("; the nearest is `{n}`"))
    ))
}

fn note_schemes(schemes: &[Balancing], args: &Args, notes: &mut Vec<String>) {
    if schemes.contains(&Balancing::AreaControlError) {
        notes.push(match args.closed_loop {
            true => "Area control error: sampled every 4 s, bias = natural response, participation by ramp, gain as tuned for the baseline.".to_owned(),
            false => "Area control error at rest: participation by ramp inside normal ranges, what is left by droop; bias and gain only set how fast it gets there.".to_owned(),
        });
    }
    if schemes.iter().any(|s| matches!(s, Balancing::Redispatch5 | Balancing::Redispatch15)) {
        notes.push("Redispatch: the operator knows everything and moves every unit within its ramp; lines are taken to stand their overload for that long, which flatters it.".to_owned());
    }
    if args.closed_loop {
        notes.push(
            "Closed loop: nothing trips on heat; lines above their rating at the end are counted."
                .to_owned(),
        );
    } else {
        notes.push(format!(
            "Protection: a line opens above 100.1 % of its rating and {} MW; frequency relays act beyond {} % of nominal; load so lost stays lost.",
            crate::sweep::cascade::SLACK_MW,
            100.0 * crate::sweep::balance::BAND_SHARE
        ));
    }
}
