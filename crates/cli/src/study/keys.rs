//! The one list of all keys of a study file: what the parser accepts and what the schema says.

use crate::scenario::keys::Kind::{Choice, Flag, Loose, Number, Path, Sections, Text, Whole};
use crate::scenario::keys::Range::AboveUpTo;
use crate::scenario::keys::{Key, key, section};

/// Most runs of a study.
pub const MOST_RUNS: i64 = 65_536;

/// Keys outside of any section, and the sections.
pub const STUDY: &[Key] = &[
    key("title", Text, "\"Budding against line tension\"", "one line that says what the study is about"),
    key("scenario", Path, "\"vesicle.toml\"", "the scenario that all runs share, relative to this file"),
    key("set", Loose, "{ time = { end = \"5 s\" } }", "entries of the scenario that are different in all runs"),
    key("axis", Sections(AXIS), "", "what is varied: one entry of the scenario, or several that move together"),
    section("design", DESIGN, "points that fill the space of all axes without values and count evenly"),
    section("repeats", REPEATS, "every point again with other seeds"),
    key("outcome", Sections(OUTCOME), "", "classes of outcomes: the first whose condition holds is taken"),
    key("continuation", Sections(CONTINUATION), "", "one run from the end state of another while a parameter moves there and back"),
    key("threshold", Sections(THRESHOLD), "", "the value of a parameter at which the outcome changes"),
    section("diagram", DIAGRAM, "what the phase diagram shows"),
    section("limits", LIMITS, "what the runs may take of the machine"),
];

const AXIS: &[Key] = &[
    key("key", Text, "\"composition.line_tension\"", "the entry of the scenario that is varied"),
    key("together", Loose, "[\"surface.radius\", \"surface.edge_length\"]", "several entries that move together, instead of key; values, from and to are then lists with one item for each"),
    key("name", Text, "\"line tension\"", "what the axis is called in the diagram"),
    key("values", Loose, "[\"0.1 pN\", \"0.2 pN\"]", "the values, one by one"),
    key("from", Loose, "\"0.1 pN\"", "first value of a range"),
    key("to", Loose, "\"1 pN\"", "last value of a range"),
    key("count", Whole(2, 10_000), "5", "number of values of a range; left out: the range belongs to [design]"),
    key("spacing", Choice(&["linear", "logarithmic"]), "\"logarithmic\"", "whether the values of a range have equal differences or equal ratios; also that of the diagram").or("\"linear\""),
];

const CONTINUATION: &[Key] = &[
    key("key", Text, "\"composition.line_tension\"", "the entry of the scenario that is varied"),
    key("together", Loose, "[\"surface.radius\", \"surface.edge_length\"]", "several entries that move together, instead of key; values, from and to are then lists with one item for each"),
    key("name", Text, "\"line tension\"", "what the axis is called in the tables"),
    key("values", Loose, "[\"0.1 pN\", \"0.2 pN\"]", "the values, one by one"),
    key("from", Loose, "\"0.1 pN\"", "first value of a range"),
    key("to", Loose, "\"1 pN\"", "last value of a range"),
    key("count", Whole(2, 10_000), "9", "number of values from the first to the last"),
    key("spacing", Choice(&["linear", "logarithmic"]), "\"logarithmic\"", "whether the values of a range have equal differences or equal ratios").or("\"linear\""),
    key("back", Flag, "true", "whether to go back to the first value, from where the way there ended").or("true"),
    key("column", Text, "\"neck_radius\"", "column of the series that is drawn against the parameter; left out: the free energy"),
];

const THRESHOLD: &[Key] = &[
    key("key", Text, "\"composition.line_tension\"", "the entry of the scenario that is varied"),
    key("together", Loose, "[\"surface.radius\", \"surface.edge_length\"]", "several entries that move together, instead of key; values, from and to are then lists with one item for each"),
    key("name", Text, "\"line tension\"", "what the axis is called in the tables"),
    key("values", Loose, "[]", "has no place in a threshold"),
    key("from", Loose, "\"0.1 pN\"", "first value of a range"),
    key("to", Loose, "\"1 pN\"", "last value of a range"),
    key("count", Whole(2, 10_000), "9", "number of values on the way, until the outcome changes; left out: the two ends, or 9 on a branch"),
    key("spacing", Choice(&["linear", "logarithmic"]), "\"logarithmic\"", "whether the values of a range have equal differences or equal ratios").or("\"linear\""),
    key("tolerance", Number(AboveUpTo(0.0, 0.5)), "0.01", "largest width of the final bracket, relative to the value").or("0.01"),
    key("start", Choice(&["fresh", "branch"]), "\"branch\"", "whether each trial starts as the scenario says, or from the end state of the nearest trial that still has the outcome before").or("\"fresh\""),
    key("direction", Choice(&["up", "down", "both"]), "\"both\"", "up: from the first value to the last; down: back; both on a branch: back from where the outcome had changed").or("\"up\""),
    key("refine", Loose, "[\"mesh\", \"interface\"]", "what is refined for an error bar, three levels each: mesh, time, interface, or tables with key, towards (zero or infinity), order and ratio"),
];

const DESIGN: &[Key] = &[
    key("points", Whole(1, MOST_RUNS), "64", "number of points (a Sobol sequence with Owen scrambling)"),
    key("seed", Whole(0, u32::MAX as i64), "0", "which scrambling").or("0"),
];

const REPEATS: &[Key] = &[
    key("count", Whole(1, 10_000), "3", "how often, with the seeds 1, 2, 3 ..."),
    key("seeds", Loose, "[1, 2, 3]", "the seeds, instead of their number"),
];

const OUTCOME: &[Key] = &[
    key("name", Text, "\"budded\"", "name of the class"),
    key("when", Text, "'neck_radius < \"0.2 um\" and domain_count >= 2'", "condition on the last row of a run and on why it stopped; left out: everything else"),
];

const DIAGRAM: &[Key] = &[
    key("x", Text, "\"composition.line_tension\"", "the axis to the right, by its name or key; left out: the first"),
    key("y", Text, "\"surface.reduced_volume\"", "the axis upwards, or a column of the series; left out: the second axis, or the free energy"),
    key("facet", Text, "\"membrane.bending_rigidity\"", "an axis with a diagram of its own for each value"),
    key("at", Loose, "{ \"membrane.bending_rigidity\" = \"20 kBT\" }", "values at which other axes are held: only those runs are shown"),
];

const LIMITS: &[Key] = &[
    key("parallel", Whole(1, 1024), "2", "runs at a time; left out: as many as there are cores"),
    key("threads", Whole(1, 1024), "1", "threads of each run").or("1"),
    key("memory", Text, "\"8 GB\"", "memory that all runs at a time may take; left out: not looked at"),
];

