//! Who got the time.

use crate::catalogue::Programme;

/// A programme's time.
#[derive(Clone, Debug, PartialEq)]
pub struct ProgrammeUse {
    /// Its id.
    pub programme: String,
    /// Share of the used time that it should have, all shares scaled to add to 1.
    pub wanted_share: f64,
    /// Share of the used time that it has had; 0 when nothing was used.
    pub used_share: f64,
    /// Time used, seconds.
    pub used_s: f64,
    /// Visits owed to its targets.
    pub owed: f64,
}

/// Shares from the time used and the visits owed, each a list of (index of the programme, amount),
/// for instance one entry a visit. An index without a programme is left out.
pub fn programme_use(
    programmes: &[Programme],
    used_s: impl IntoIterator<Item = (usize, f64)>,
    owed: impl IntoIterator<Item = (usize, f64)>,
) -> Vec<ProgrammeUse> {
    let claimed: f64 = programmes.iter().map(|programme| programme.share).sum();
    let mut rows: Vec<ProgrammeUse> = programmes
        .iter()
        .map(|programme| ProgrammeUse {
            programme: programme.id.clone(),
            wanted_share: share(programme.share, claimed),
            used_share: 0.0,
            used_s: 0.0,
            owed: 0.0,
        })
        .collect();
    for (index, seconds) in used_s {
        if let Some(row) = rows.get_mut(index) {
            row.used_s += seconds;
        }
    }
    for (index, visits) in owed {
        if let Some(row) = rows.get_mut(index) {
            row.owed += visits;
        }
    }
    let total: f64 = rows.iter().map(|row| row.used_s).sum();
    for row in &mut rows {
        row.used_share = share(row.used_s, total);
    }
    rows
}

fn share(part: f64, whole: f64) -> f64 {
    if whole > 0.0 { part / whole } else { 0.0 }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn shares_add_to_one() {
        let programme = |id: &str, share: f64| Programme {
            id: id.to_owned(),
            label: id.to_owned(),
            weight: 1.0,
            share,
            min_period_d: 1.0,
            max_period_d: 10.0,
        };
        let programmes = [programme("a", 0.6), programme("b", 0.2)];
        let used = [(0, 100.0), (1, 200.0), (0, 100.0), (7, 999.0)];
        let rows = programme_use(&programmes, used, [(1, 2.5)]);
        assert_eq!((rows[0].used_share, rows[1].used_share), (0.5, 0.5));
        assert!((rows[0].wanted_share - 0.75).abs() < 1e-12);
        assert_eq!((rows[0].owed, rows[1].owed), (0.0, 2.5));
        let unused = programme_use(&programmes, [], []);
        assert_eq!(unused[0].used_share, 0.0);
    }
}
