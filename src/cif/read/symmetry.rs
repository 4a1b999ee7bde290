//! The symmetry of a block: operations, Hall symbol, Hermann-Mauguin symbol, number, in this order of trust.

use super::super::document::{Block, Value};
use super::super::operation::parse_operation;
use super::super::parse::shown;
use super::cell::{surplus_of, value_of};
use super::tags::{COORDINATE_SYSTEM, HALL, HERMANN_MAUGUIN, NUMBER, OPERATIONS, Spellings};
use crate::cell::Lattice;
use crate::crystal::Operation;
use crate::diagnostic::{Code, Diagnostic, Span};
use crate::symmetry::setting::{
    Candidates, Group, Hint, Motion, Setting, from_hall, from_hm, from_number, standard,
};

/// More operations than this are accepted only if the file lists them itself.
const MAX_ORDER: usize = 192;

/// Which statement about symmetry was used.
#[derive(Debug, Clone, Copy, PartialEq, Eq, Default)]
pub enum SymmetrySource {
    /// The listed operations.
    Operations,
    /// The Hall symbol.
    Hall,
    /// The Hermann-Mauguin symbol.
    HermannMauguin,
    /// The number of the International Tables.
    Number,
    /// Nothing is stated: the identity alone was used.
    #[default]
    None,
}

/// What a block states about its symmetry.
#[derive(Debug, Clone, PartialEq, Eq, Default)]
pub struct StatedSymmetry {
    /// Hall symbol.
    pub hall: Option<String>,
    /// Hermann-Mauguin symbol.
    pub hm: Option<String>,
    /// Number of the International Tables.
    pub number: Option<u16>,
    /// How many operations are listed.
    pub operations: usize,
    /// Which statement was used.
    pub source: SymmetrySource,
    /// Number, in the list of 530, of the setting that was used, if a name was used.
    pub hall_number: Option<u16>,
}

/// Where the statements are in the file.
#[derive(Debug, Clone, Copy, Default)]
struct Places {
    hall: Option<Span>,
    hm: Option<Span>,
    number: Option<Span>,
}

/// Finds the operations of a block. When a name leaves a choice of settings, `prefer` is asked how badly each one fits
/// the sites, and the one with the smallest answer is used.
pub(super) fn read_symmetry<F>(
    block: &Block<'_, '_>,
    source: &[u8],
    lattice: &Lattice,
    prefer: F,
    noticed: &mut Vec<Diagnostic>,
) -> (StatedSymmetry, Result<Vec<Operation>, Diagnostic>)
where
    F: Fn(&[Operation]) -> u32,
{
    let (mut stated, places) = read_names(block, source, noticed);
    let code = value_of(block, COORDINATE_SYSTEM);
    let code = code.as_ref().and_then(Value::stated);
    let named = Named {
        hall: stated.hall.as_deref().and_then(from_hall),
        hm: stated.hm.as_deref().map_or_else(Candidates::default, |symbol| {
            from_hm(symbol, &Hint { lattice: Some(lattice), code, number: stated.number })
        }),
        number: stated.number,
        hint: Hint { lattice: Some(lattice), code, number: None },
        places,
    };
    named.report_unknown(&stated, noticed);
    let operations = match read_operations(block, &named, noticed) {
        Err(refusal) => Err(refusal),
        Ok(Some((operations, group, count))) => {
            stated.operations = count;
            stated.source = SymmetrySource::Operations;
            named.compare(&group, "the operations", &stated, noticed);
            Ok((operations, group))
        }
        Ok(None) => named.choose(&mut stated, prefer, noticed),
    };
    let operations = operations.and_then(|(operations, group)| {
        if group.fits(lattice) {
            return Ok(operations);
        }
        Err(Diagnostic::error(
            Code::SymmetryMetric,
            format!(
                "the {} symmetry operations do not keep the lengths and angles of the cell within 2 %",
                group.order()
            ),
        )
        .at(block.span))
    });
    (stated, operations)
}

fn read_names(
    block: &Block<'_, '_>,
    source: &[u8],
    noticed: &mut Vec<Diagnostic>,
) -> (StatedSymmetry, Places) {
    // A symbol that was not quoted goes on in the values after it.
    let text = |tags: Spellings| {
        let value = tags.iter().filter_map(|tag| block.value(tag)).find(|value| value.stated().is_some())?;
        let mut text = value.stated()?.to_owned();
        if let Some(surplus) = surplus_of(block, tags).filter(|surplus| surplus.line == value.span.line) {
            let rest = String::from_utf8_lossy(source.get(surplus.start..surplus.end).unwrap_or_default());
            text = format!("{text} {}", rest.lines().next().unwrap_or_default());
        }
        Some((text, value.span))
    };
    let mut stated = StatedSymmetry::default();
    let mut places = Places::default();
    if let Some((hall, span)) = text(HALL) {
        (stated.hall, places.hall) = (Some(hall), Some(span));
    }
    if let Some((hm, span)) = text(HERMANN_MAUGUIN) {
        (stated.hm, places.hm) = (Some(hm), Some(span));
    }
    if let Some((number, span)) = text(NUMBER) {
        stated.number = number.parse().ok().filter(|number| (1..=230).contains(number));
        places.number = Some(span);
        if stated.number.is_none() {
            let message = format!("space-group number '{}' is not a number from 1 to 230", shown(&number));
            noticed.push(Diagnostic::warning(Code::SymmetryUnknown, message).at(span));
        }
    }
    (stated, places)
}

/// Listed operations, each once, with their group and the number of lines.
type Listed = (Vec<Operation>, Group, usize);

fn read_operations(
    block: &Block<'_, '_>,
    named: &Named<'_>,
    noticed: &mut Vec<Diagnostic>,
) -> Result<Option<Listed>, Diagnostic> {
    let tables = OPERATIONS.iter().filter_map(|tag| block.column(&[tag]));
    let Some(table) = tables.into_iter().find(|table| table.iter().any(|row| row.stated(0).is_some())) else {
        return Ok(None);
    };
    if let Some(fault) = table.fault() {
        return Err(fault.clone());
    }
    let span = table.span().unwrap_or(block.span);
    let mut listed: Vec<Motion> = Vec::with_capacity(table.rows());
    let mut seen = std::collections::HashSet::new();
    let mut repeated = 0;
    for (number, row) in table.iter().enumerate() {
        let Some(value) = row.value(0) else { continue };
        let motion = parse_operation(&value.text).map_err(|error| {
            let message = format!(
                "symmetry operation {}, '{}', cannot be read: {error}",
                number + 1,
                shown(&value.text)
            );
            Diagnostic::error(Code::SymmetryOperation, message).at(value.span).hint("'-x, y+1/2, -z+1/2'")
        })?;
        if seen.insert(motion) {
            listed.push(motion);
        } else {
            repeated += 1;
        }
    }
    if repeated > 0 {
        let message =
            format!("{repeated} of the {} symmetry operations are listed more than once", table.rows());
        noticed.push(Diagnostic::warning(Code::SymmetryNotGroup, message).at(span));
    }
    let group = Group::generate(listed.iter().copied(), MAX_ORDER.max(listed.len()));
    if let Some(group) = group.as_ref().filter(|group| group.order() == listed.len()) {
        let operations = listed.iter().map(Motion::to_operation).collect();
        return Ok(Some((operations, group.clone(), table.rows())));
    }
    let lacks_identity_alone = group
        .as_ref()
        .is_some_and(|group| group.order() == listed.len() + 1 && !listed.contains(&Motion::IDENTITY));
    let completed = group.filter(|group| lacks_identity_alone || named.has(group));
    let Some(group) = completed else { return Err(not_a_group(&listed).at(span)) };
    let message = format!(
        "{} symmetry operations are listed, but they generate {}; the missing ones were added",
        listed.len(),
        group.order()
    );
    noticed.push(Diagnostic::warning(Code::SymmetryNotGroup, message).at(span));
    Ok(Some((group.operations(), group, table.rows())))
}

/// The refusal of a list with a gap, naming the first product that is not in it.
fn not_a_group(listed: &[Motion]) -> Diagnostic {
    let members: std::collections::HashSet<&Motion> = listed.iter().collect();
    for (j, first) in listed.iter().enumerate() {
        for (i, second) in listed.iter().enumerate() {
            if let Some(product) = second.after(first).filter(|product| !members.contains(product)) {
                return Diagnostic::error(
                    Code::SymmetryNotGroup,
                    format!(
                        "the {} symmetry operations are not a group: {first} (number {}) followed by {second} (number {}) gives {product}, which is not listed",
                        listed.len(),
                        j + 1,
                        i + 1
                    ),
                )
                .hint(format!("'{product}'"));
            }
        }
    }
    Diagnostic::error(
        Code::SymmetryNotGroup,
        format!("the {} symmetry operations are not a group", listed.len()),
    )
}

/// The settings that the names in the file may mean.
struct Named<'a> {
    hall: Option<Setting>,
    hm: Candidates,
    number: Option<u16>,
    hint: Hint<'a>,
    places: Places,
}

impl Named<'_> {
    /// The settings of the number, which are made only when they are needed.
    fn of_number(&self) -> Candidates {
        self.number.map_or_else(Candidates::default, |number| from_number(number, &self.hint))
    }

    fn has(&self, group: &Group) -> bool {
        let of_number = self.of_number();
        let mut settings = self.hall.iter().chain(&self.hm.settings).chain(&of_number.settings);
        settings.any(|setting| setting.group().equals(group))
    }

    fn report_unknown(&self, stated: &StatedSymmetry, noticed: &mut Vec<Diagnostic>) {
        let mut report = |kind: &str, symbol: &str, place: Option<Span>| {
            let message = format!("{kind} symbol '{}' is not known", shown(symbol));
            let found = Diagnostic::warning(Code::SymmetryUnknown, message);
            noticed.push(match place {
                Some(span) => found.at(span),
                None => found,
            });
        };
        if let Some(symbol) = stated.hall.as_deref().filter(|_| self.hall.is_none()) {
            report("Hall", symbol, self.places.hall);
        }
        if let Some(symbol) = stated.hm.as_deref().filter(|_| self.hm.settings.is_empty()) {
            report("Hermann-Mauguin", symbol, self.places.hm);
        }
    }

    /// Reports names that contradict the group in use.
    fn compare(&self, group: &Group, what: &str, stated: &StatedSymmetry, noticed: &mut Vec<Diagnostic>) {
        let mut report = |message: String, place: Option<Span>| {
            let found = Diagnostic::warning(Code::SymmetryContradiction, message);
            noticed.push(match place {
                Some(span) => found.at(span),
                None => found,
            });
        };
        let is_used = |source| stated.source == source;
        if let (Some(setting), Some(symbol)) =
            (self.hall.as_ref().filter(|_| !is_used(SymmetrySource::Hall)), &stated.hall)
        {
            let named = setting.group();
            if !named.equals(group) {
                let difference = difference(named, group, what);
                report(format!("Hall symbol '{}' {difference}", shown(symbol)), self.places.hall);
            }
        }
        if let Some(symbol) = stated.hm.as_ref().filter(|_| !is_used(SymmetrySource::HermannMauguin)) {
            let settings = &self.hm.settings;
            let agrees = |setting: &Setting| {
                setting.group().equals(group) || setting.group().equals_up_to_origin(group)
            };
            if let Some(first) = settings.first().filter(|_| !settings.iter().any(agrees)) {
                let difference = difference(first.group(), group, what);
                report(format!("Hermann-Mauguin symbol '{}' {difference}", shown(symbol)), self.places.hm);
            }
        }
        if let Some(number) = stated.number.filter(|_| !is_used(SymmetrySource::Number)) {
            // Only the geometric class is compared: the file may use any axes.
            if let Some(first) = standard(number).filter(|s| s.group().kinds() != group.kinds()) {
                let difference = difference(first.group(), group, what);
                report(format!("space-group number {number} {difference}"), self.places.number);
            }
        }
    }

    /// The operations of the most trusted name that is known.
    fn choose<F>(
        &self,
        stated: &mut StatedSymmetry,
        prefer: F,
        noticed: &mut Vec<Diagnostic>,
    ) -> Result<(Vec<Operation>, Group), Diagnostic>
    where
        F: Fn(&[Operation]) -> u32,
    {
        let of_number = if self.hall.is_none() && self.hm.settings.is_empty() {
            self.of_number()
        } else {
            Candidates::default()
        };
        let (setting, source) = if let Some(setting) = &self.hall {
            (setting, SymmetrySource::Hall)
        } else if !self.hm.settings.is_empty() {
            let name =
                format!("Hermann-Mauguin symbol '{}'", shown(stated.hm.as_deref().unwrap_or_default()));
            (pick(&self.hm, &name, self.places.hm, prefer, noticed), SymmetrySource::HermannMauguin)
        } else if !of_number.settings.is_empty() {
            let name = format!("space-group number {}", stated.number.unwrap_or_default());
            (pick(&of_number, &name, self.places.number, prefer, noticed), SymmetrySource::Number)
        } else {
            return self.without_setting(noticed);
        };
        stated.source = source;
        stated.hall_number = setting.hall_number;
        let name = format!("'{}'", setting.hall);
        self.compare(setting.group(), &name, stated, noticed);
        Ok((setting.operations(), setting.group().clone()))
    }

    fn without_setting(&self, noticed: &mut Vec<Diagnostic>) -> Result<(Vec<Operation>, Group), Diagnostic> {
        let place = self.places.hall.or(self.places.hm).or(self.places.number);
        if let Some(span) = place {
            return Err(Diagnostic::error(
                Code::SymmetryUnknown,
                "no symmetry operations are listed, and no symbol or number of the space group is known",
            )
            .at(span)
            .hint("_space_group_symop_operation_xyz with one operation per line"));
        }
        noticed.push(
            Diagnostic::warning(
                Code::SymmetryMissing,
                "no symmetry is stated; the listed sites were taken for all atoms of the cell",
            )
            .hint("_space_group_symop_operation_xyz 'x, y, z'"),
        );
        let group = Group::generate([], 1)
            .ok_or_else(|| Diagnostic::error(Code::SymmetryMissing, "no symmetry is stated"))?;
        Ok((group.operations(), group))
    }
}

/// The setting that fits the sites best, with a word on how the choice was made.
fn pick<'c, F>(
    candidates: &'c Candidates,
    name: &str,
    place: Option<Span>,
    prefer: F,
    noticed: &mut Vec<Diagnostic>,
) -> &'c Setting
where
    F: Fn(&[Operation]) -> u32,
{
    let settings = &candidates.settings;
    if !candidates.is_ambiguous() {
        return &settings[0];
    }
    let scores: Vec<u32> = settings.iter().map(|setting| prefer(&setting.operations())).collect();
    let best = scores.iter().min().copied().unwrap_or(0);
    let first = scores.iter().position(|score| *score == best).unwrap_or(0);
    let chosen = &settings[first];
    let is_decided = scores.iter().filter(|score| **score == best).count() == 1;
    let others: Vec<String> = settings
        .iter()
        .enumerate()
        .filter(|(index, _)| *index != first && (is_decided || scores[*index] == best))
        .map(|(_, setting)| format!("'{}'", setting.hall))
        .collect();
    let others = match others.as_slice() {
        [front @ .., last] if !front.is_empty() && others.len() <= 3 => {
            format!("{} or {last}", front.join(", "))
        }
        [first, second, ..] => format!("{first}, {second} or one of {} more", others.len() - 2),
        _ => others.join(""),
    };
    let severity_and_reason = if is_decided {
        (
            crate::diagnostic::Severity::Note,
            "because it alone makes the sites agree with the formula and distances",
        )
    } else {
        (crate::diagnostic::Severity::Warning, "because it comes first; the sites do not decide")
    };
    let message = format!(
        "{name} leaves the setting open: '{}' was used and not {others}, {}",
        chosen.hall, severity_and_reason.1
    );
    let found = Diagnostic::new(severity_and_reason.0, Code::SymmetrySetting, message)
        .hint(format!("_space_group_name_Hall '{}'", chosen.hall));
    noticed.push(match place {
        Some(span) => found.at(span),
        None => found,
    });
    chosen
}

/// How a named group differs from the one in use, as the end of a sentence.
fn difference(named: &Group, used: &Group, what: &str) -> String {
    let order = |group: &Group| format!("{} operations", group.order());
    if named.kinds() != used.kinds() {
        let named_class = named.order() / named.translations();
        let used_class = used.order() / used.translations();
        format!(
            "means {} ({named_class} rotations), but {what} are {} ({used_class} rotations) of another class; the latter were used",
            order(named),
            used.order()
        )
    } else if named.order() != used.order() {
        format!(
            "means {} with {} lattice points per cell, but {what} are {} with {}; the latter were used",
            order(named),
            named.translations(),
            used.order(),
            used.translations()
        )
    } else if named.equals_up_to_origin(used) {
        format!("has another origin than {what}; the latter were used")
    } else {
        format!("has other axes or translations than {what}; the latter were used")
    }
}
