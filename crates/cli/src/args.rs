//! The command line, as the user types it.

use clap::{Args, Parser, Subcommand, ValueEnum, ValueHint};
use std::path::PathBuf;

const EXAMPLES: &str = "\
Examples:
  pellicle check vesicle.toml                     what the scenario says, without running it
  pellicle run vesicle.toml                       run it; results go to vesicle-run/
  pellicle run vesicle.toml --out trial --set time.end=\"5 s\"
                                                  the same with one number changed
  pellicle resume trial                           go on after Ctrl-C, a crash or a power cut
  pellicle resume trial --until \"20 s\"            go on beyond the time it was planned for
  pellicle measure cell.ply --unit um             area, volume, curvature and faults of a surface
  pellicle report vesicle-run                     plots and pictures of a run as one HTML page
  pellicle scan study.toml                        many runs, a table and a phase diagram
  pellicle schema > scenario.schema.json          everything a scenario may say, for editors

Results of a run: series.csv opens in any spreadsheet or with pandas, fields.pvd in any viewer of VTK files,
summary.json says how the run ended.

Exit codes:
    0  done
    1  numerical trouble: the solver stopped the run; everything up to there is written
    2  bad input: the command line, the scenario, or a directory that must not be overwritten
    3  file trouble: unreadable, unwritable, disc full, damaged, or in use by another run
  130  interrupted by Ctrl-C or a scheduler; `pellicle resume` goes on";

/// Shapes, flow, phases, binding and loads of fluid lipid membranes.
#[derive(Debug, Parser)]
#[command(
    name = "pellicle",
    version,
    about = "Simulates curved fluid lipid membranes: shapes, flow, phases, binding, loads",
    long_about = "Simulates how a curved fluid lipid membrane moves: bending, in-plane flow, lipid phases, bound \
                  protein and mechanical loads, coupled, by finite elements on the surface.\n\n\
                  A scenario (a TOML file) says what the membrane is and how long to watch it. One run writes one \
                  directory.",
    after_long_help = EXAMPLES,
    after_help = "`pellicle --help` shows examples and exit codes.",
    max_term_width = 100,
    arg_required_else_help = true
)]
pub struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub command: Command,
}

/// What to do.
#[derive(Debug, Subcommand)]
pub enum Command {
    /// Run a scenario.
    #[command(after_long_help = "\
Examples:
  pellicle run vesicle.toml
  pellicle run vesicle.toml --out trial --set membrane.bending_rigidity=\"25 kBT\"
  pellicle run vesicle.toml --start-from soft-run --set membrane.bending_rigidity=\"30 kBT\"
                                                        from the end state of another run
  pellicle run vesicle.toml --error-bars=mesh,time,interface
                                                        every number of the end with its error bar
  pellicle run vesicle.toml --quiet --progress json     under a scheduler

Ctrl-C (or SIGTERM) finishes the step, writes a checkpoint and says how to go on; a second one ends at once.")]
    Run(Run),
    /// Go on with a run that was interrupted, or watch a finished one for longer.
    #[command(after_long_help = "\
Examples:
  pellicle resume vesicle-run
  pellicle resume vesicle-run --until \"20 s\"

A resumed run writes the same bytes as one that was never interrupted. Rows and frames later than the checkpoint
are dropped and computed again.")]
    Resume(Resume),
    /// Say what a scenario means, what matters in it, and what is doubtful about it, without running it.
    #[command(after_long_help = "\
Examples:
  pellicle check vesicle.toml
  pellicle check vesicle.toml --set composition.interface_width=\"0.3 um\"
  pellicle check vesicle.toml --json | jq '.numbers[] | {name, value}'

Prints the dimensionless numbers of the case with what follows from them, whether the mesh resolves
what it shall show, what the run will take of memory and time, and values that no lipid bilayer has
(as warnings).")]
    Check(Check),
    /// Measure surfaces from files: area, volume, bending energy, curvature, necks, faults of the mesh.
    #[command(after_long_help = "\
Examples:
  pellicle measure cell.ply
  pellicle measure cell.stl --unit um --out cell.vtu     lengths in metres; curvature for a viewer
  pellicle measure run/surface_*.vtu --csv > shapes.csv   one row per frame

Reads PLY, OBJ, STL, VTK, VTU and VTP. Lengths are in the unit of the file unless --unit says what
it is. A mesh that cannot be measured is refused with what is wrong and where (exit code 2).")]
    Measure(Measure),
    /// Make one page of plots and pictures of a run, or of several to compare.
    #[command(after_long_help = "\
Examples:
  pellicle report vesicle-run
  pellicle report soft stiff --out comparison.html        two runs in the same plots

The page is a single HTML file without scripts or links; it opens in any browser and prints.")]
    Report(Report),
    /// Run a scenario many times with some of its entries varied; make a table and a phase diagram of the outcomes.
    #[command(after_long_help = "\
Examples:
  pellicle scan study.toml                    all runs, as many at a time as the study says; again to go on
  pellicle scan study.toml --parallel 8 --memory \"24 GB\" --quiet --progress json
  pellicle scan threshold.toml                continuation and thresholds need no axes
  pellicle scan study.toml --list             names and parameters of the runs, with tabs
  pellicle scan study.toml --only r3f2a9      one run (a task on a cluster); then, once:
  pellicle scan study.toml --gather           table, diagram and page of what is there

A study file:
  scenario = \"vesicle.toml\"
  [[axis]]
  key = \"composition.line_tension\"
  from = \"0.05 pN\"
  to = \"0.8 pN\"
  count = 5
  spacing = \"logarithmic\"
  [[axis]]
  key = \"surface.reduced_volume\"
  values = [0.7, 0.8, 0.9]
  [repeats]
  count = 3
  [[outcome]]
  name = \"budded\"
  when = 'neck_radius < \"0.2 um\" and domain_count >= 2'

What follows from run to run:
  [[continuation]]                  each run starts from the end of the one before, there and back; drawn
  key = \"composition.line_tension\"
  from = \"0.1 pN\"
  to = \"1 pN\"
  count = 10
  column = \"neck_radius\"
  [[threshold]]                     the value at which the outcome changes, with its error bar
  key = \"composition.line_tension\"
  from = \"0.1 pN\"
  to = \"1 pN\"
  tolerance = 0.01
  start = \"branch\"
  direction = \"both\"
  refine = [\"mesh\", \"interface\"]

`pellicle schema --of study` has all keys. A run is named by what decides its course: changed or added values make
new runs and keep the old. Ctrl-C lets all runs write checkpoints; whatever happened, the same command goes on.
Runs that cannot be run or in which the solver gave up are listed with their reason and are no error of the scan.")]
    Scan(Scan),
    /// Print the JSON schema of scenarios or studies, for editors that complete and check as you type.
    Schema {
        /// What the schema describes.
        #[arg(long, value_enum, default_value_t = Described::Scenario, value_name = "KIND")]
        of: Described,
    },
    /// Print the completions of a shell.
    #[command(after_long_help = "\
Example:
  pellicle completions bash > ~/.local/share/bash-completion/completions/pellicle")]
    Completions {
        /// The shell.
        #[arg(value_name = "SHELL")]
        shell: clap_complete::Shell,
    },
}

/// Arguments of `run`.
#[derive(Debug, Args)]
pub struct Run {
    /// The scenario, a TOML file.
    #[arg(value_name = "SCENARIO", value_hint = ValueHint::FilePath)]
    pub scenario: PathBuf,
    /// Directory for the results [default: the scenario's name with -run, in the current directory].
    #[arg(long, short, value_name = "DIR", value_hint = ValueHint::DirPath)]
    pub out: Option<PathBuf>,
    /// Replace one entry of the scenario, as in time.end="5 s"; may be given again.
    #[arg(long = "set", value_name = "KEY=VALUE")]
    pub set: Vec<String>,
    /// Start from the end state of the run in this directory, with the parameters of this scenario.
    #[arg(long, value_name = "DIR", value_hint = ValueHint::DirPath)]
    pub start_from: Option<PathBuf>,
    /// Run coarser levels of mesh, time step or interface width, too, and tell every number with its error bar.
    #[arg(long, value_name = "WHAT", num_args = 0..=1, require_equals = true, default_missing_value = "mesh,time",
          conflicts_with = "start_from")]
    pub error_bars: Option<String>,
    /// Replace an earlier run in the directory (deletes the files of a run there, nothing else).
    #[arg(long)]
    pub force: bool,
    /// How it goes and what is shown.
    #[command(flatten)]
    pub manner: Manner,
}

/// Arguments of `resume`.
#[derive(Debug, Args)]
pub struct Resume {
    /// Directory of the run.
    #[arg(value_name = "DIR", value_hint = ValueHint::DirPath)]
    pub folder: PathBuf,
    /// Simulated time at which to stop instead of the scenario's, as in "20 s" or 20 (seconds).
    #[arg(long, value_name = "TIME")]
    pub until: Option<String>,
    /// How it goes and what is shown.
    #[command(flatten)]
    pub manner: Manner,
}

/// Arguments of `check`.
#[derive(Debug, Args)]
pub struct Check {
    /// The scenario, a TOML file.
    #[arg(value_name = "SCENARIO", value_hint = ValueHint::FilePath)]
    pub scenario: PathBuf,
    /// Replace one entry of the scenario, as in time.end="5 s"; may be given again.
    #[arg(long = "set", value_name = "KEY=VALUE")]
    pub set: Vec<String>,
    /// Print the scenario with every default filled in, too.
    #[arg(long)]
    pub resolved: bool,
    /// Print one JSON object, warnings included.
    #[arg(long)]
    pub json: bool,
}

/// Arguments of `measure`.
#[derive(Debug, Args)]
pub struct Measure {
    /// Surfaces: PLY, OBJ, STL, VTK, VTU or VTP.
    #[arg(value_name = "FILE", value_hint = ValueHint::FilePath, required = true)]
    pub files: Vec<PathBuf>,
    /// The files' unit of length, as in um or "0.1 um"; results are then in metres.
    #[arg(long, value_name = "UNIT")]
    pub unit: Option<String>,
    /// Print a JSON list with an object per file.
    #[arg(long, conflicts_with = "csv")]
    pub json: bool,
    /// Print a table with a row per file.
    #[arg(long)]
    pub csv: bool,
    /// Write the surface with its curvature to a VTU file.
    #[arg(long, short, value_name = "FILE", value_hint = ValueHint::FilePath)]
    pub out: Option<PathBuf>,
}

/// Arguments of `report`.
#[derive(Debug, Args)]
pub struct Report {
    /// Directories of runs.
    #[arg(value_name = "DIR", value_hint = ValueHint::DirPath, required = true)]
    pub folders: Vec<PathBuf>,
    /// The page to write; one that is there is replaced.
    #[arg(long, short, value_name = "FILE", value_hint = ValueHint::FilePath, default_value = "report.html")]
    pub out: PathBuf,
}

/// Arguments of `scan`.
#[derive(Debug, Args)]
pub struct Scan {
    /// The study, a TOML file.
    #[arg(value_name = "STUDY", value_hint = ValueHint::FilePath)]
    pub study: PathBuf,
    /// Directory for the results [default: the study's name with -scan, in the current directory].
    #[arg(long, short, value_name = "DIR", value_hint = ValueHint::DirPath)]
    pub out: Option<PathBuf>,
    /// Do this run only, without table and diagram; an id or its beginning; may be given again.
    #[arg(long, value_name = "ID", conflicts_with_all = ["list", "gather"])]
    pub only: Vec<String>,
    /// Print ids, states and parameters of all runs, and do nothing.
    #[arg(long, conflicts_with = "gather")]
    pub list: bool,
    /// Make table, diagram and page of what is there, without running anything.
    #[arg(long)]
    pub gather: bool,
    /// Begin failed runs anew.
    #[arg(long)]
    pub retry_failed: bool,
    /// Runs at a time [default: what the study says, or as many as there are cores].
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub parallel: Option<u16>,
    /// Threads of each run [default: what the study says, or 1].
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub threads: Option<u16>,
    /// Memory that all runs at a time may take, as in "24 GB" [default: what the study says, or any].
    #[arg(long, value_name = "SIZE")]
    pub memory: Option<String>,
    /// Print errors only.
    #[arg(long, short)]
    pub quiet: bool,
    /// How progress is shown.
    #[arg(long, value_enum, default_value_t = Shown::Auto)]
    pub progress: Shown,
}

/// What a schema describes.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum Described {
    /// Scenarios.
    Scenario,
    /// Studies.
    Study,
}

/// How a run goes and what it shows.
#[derive(Debug, Args)]
pub struct Manner {
    /// Threads to use; the results do not depend on it [default: all cores].
    #[arg(long, value_name = "N", value_parser = clap::value_parser!(u16).range(1..=1024))]
    pub threads: Option<u16>,
    /// Print errors only.
    #[arg(long, short)]
    pub quiet: bool,
    /// How progress is shown.
    #[arg(long, value_enum, default_value_t = Shown::Auto)]
    pub progress: Shown,
}

/// How progress is shown.
#[derive(Clone, Copy, Debug, PartialEq, Eq, ValueEnum)]
pub enum Shown {
    /// A bar when the error output is a terminal, else nothing.
    Auto,
    /// A bar on the error output.
    Bar,
    /// One JSON object per line on the standard output.
    Json,
    /// Nothing.
    None,
}

#[cfg(test)]
mod tests {
    use super::*;
    use clap::CommandFactory;

    #[test]
    fn the_command_line_is_consistent() {
        Arguments::command().debug_assert();
    }
}
