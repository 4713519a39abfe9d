//! What can be typed.

use clap::{Args, Parser, Subcommand, ValueEnum};
use std::num::NonZeroUsize;
use std::path::PathBuf;

/// From solar-disk frames taken through the air to the true shape of the limb.
#[derive(Debug, Parser)]
#[command(version, about, max_term_width = 100)]
pub(crate) struct Arguments {
    /// What to do.
    #[command(subcommand)]
    pub(crate) command: Command,
    /// Say nothing but results and errors.
    #[arg(short, long, global = true, conflicts_with = "verbose")]
    pub(crate) quiet: bool,
    /// Say more: what was assumed, what came from the headers, how long each stage took.
    #[arg(short, long, global = true)]
    pub(crate) verbose: bool,
    /// Worker threads; all cores by default. The result is the same for any number.
    #[arg(long, global = true, value_name = "N")]
    pub(crate) threads: Option<NonZeroUsize>,
}

/// The commands.
#[derive(Debug, Subcommand)]
pub(crate) enum Command {
    /// Make a small session, reduce it, say what came out and where the report lies.
    #[command(after_help = "Example: truelimb demo -o /tmp/first-look")]
    Demo(Demo),
    /// Reduce a session: from frames to a shape with an error bar.
    #[command(
        after_help = "Example: truelimb reduce session.toml -o result\n\nExit status 3: done, but the oblateness cannot be told from the instrument; the report says what to observe instead."
    )]
    Reduce(Reduce),
    /// The air alone: Fried's parameter by motion and by blur, its time scale, the floor it sets.
    #[command(
        after_help = "Example: truelimb seeing session.toml -o air\n\nIt needs no rolls: a session whose oblateness would be refused is measured all the same."
    )]
    Seeing(Seeing),
    /// Combine the results of several sessions: one value, a series, what they share kept shared.
    #[command(
        after_help = "Example: truelimb combine season/*/ -o combined --common \"plate scale\"\n\nExit status 3: done, but fewer than two sessions separate the oblateness from the instrument."
    )]
    Combine(crate::combine::Combine),
    /// Inject known shapes into sessions like this one, reduce each, and say how well they come back.
    #[command(
        after_help = "Example: truelimb recover session.toml --injected 0,8 --n 40 --result result"
    )]
    Recover(crate::recover::Recover),
    /// Make a session with known truth.
    #[command(after_help = "Example: truelimb simulate -o fake --seed 7")]
    Simulate(Simulate),
    /// Limb and shape of one image, in pixels, without a session.
    #[command(after_help = "Example: truelimb limb sun.fits --json")]
    Limb(Limb),
    /// Refraction, its effect on the disk and what it is sensitive to, without frames.
    #[command(
        after_help = "Example: truelimb refraction --latitude-deg 30.94 --height-m 2240 --pressure-hpa 778 --temperature-c 9 --humidity 0.35 --wavelength-nm 550 --zenith-deg 30,45,60"
    )]
    Refraction(Refraction),
    /// Results and published values on one footing: ground against space.
    #[command(
        after_help = "Example: truelimb compare result values.csv -o comparison\n\nStart a table of values with: truelimb compare --template > values.csv"
    )]
    Compare(Compare),
    /// A day before it begins: when to observe, how to turn the instrument, what error to expect.
    #[command(
        after_help = "Example: truelimb plan session.toml --date 2026-06-21 --r0-m 0.07 --hours 3 -o plan\n\nThe session file needs no frames yet, nor any [[sequence]].\n\nExit status 3: done, but the shape cannot be measured that day."
    )]
    Plan(crate::plan::PlanArguments),
    /// Say what is in a folder: sequences, times, headers, and what a session file still needs.
    #[command(
        after_help = "Example: truelimb inspect tonight --write session.toml\n\nOnly headers and tables are read. The session file that it starts has every key with its meaning; those that must be filled in are marked NEEDED."
    )]
    Inspect(Inspect),
    /// Draw the report of a result again.
    #[command(
        after_help = "Example: truelimb report result\n\nThe same version writes the same bytes as the reduction did."
    )]
    Report(Report),
    /// Print the JSON Schema of the session file or of the result.
    #[command(after_help = "Example: truelimb schema result > result.schema.json")]
    Schema(Schema),
    /// Print completions for a shell.
    #[command(
        after_help = "Example: truelimb completions bash > ~/.local/share/bash-completion/completions/truelimb"
    )]
    Completions(Completions),
    /// Print the manual page, or write one for each command.
    #[command(after_help = "Example: truelimb man | man -l -")]
    Man(Man),
}

/// `truelimb inspect`.
#[derive(Args, Debug)]
pub(crate) struct Inspect {
    /// The folder with the frames, or one file.
    #[arg(value_name = "DIR", default_value = ".")]
    pub(crate) folder: PathBuf,
    /// Start a session file; a relative path is taken from DIR, and no file is written over.
    #[arg(long, value_name = "FILE")]
    pub(crate) write: Option<PathBuf>,
    /// Print JSON.
    #[arg(long)]
    pub(crate) json: bool,
}

/// `truelimb report`.
#[derive(Args, Debug)]
pub(crate) struct Report {
    /// The folder of a result.
    #[arg(value_name = "DIR")]
    pub(crate) folder: PathBuf,
    /// Print JSON: the names of the files written.
    #[arg(long)]
    pub(crate) json: bool,
}

/// `truelimb schema`.
#[derive(Args, Debug)]
pub(crate) struct Schema {
    /// Of which file.
    #[arg(value_name = "WHICH", default_value = "session")]
    pub(crate) which: Described,
}

/// Files that have a schema.
#[derive(Clone, Copy, Debug, ValueEnum)]
pub(crate) enum Described {
    /// The session file.
    Session,
    /// The file result.json.
    Result,
}

/// `truelimb completions`.
#[derive(Args, Debug)]
pub(crate) struct Completions {
    /// The shell.
    #[arg(value_name = "SHELL")]
    pub(crate) shell: clap_complete::Shell,
}

/// `truelimb man`.
#[derive(Args, Debug)]
pub(crate) struct Man {
    /// Write a page for each command into this folder instead; it is made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: Option<PathBuf>,
}

/// `truelimb demo`.
#[derive(Args, Debug)]
pub(crate) struct Demo {
    /// Folder for session and result; made when it is not there.
    #[arg(short, long, default_value = "demo", value_name = "DIR")]
    pub(crate) output: PathBuf,
    /// Print result.json on stdout.
    #[arg(long)]
    pub(crate) json: bool,
    /// Seed of everything random.
    #[arg(long, default_value_t = 1)]
    pub(crate) seed: u64,
}

/// `truelimb reduce`.
#[derive(Args, Debug)]
pub(crate) struct Reduce {
    /// The session file.
    #[arg(value_name = "SESSION")]
    pub(crate) session: PathBuf,
    /// Folder for the result; made when it is not there.
    #[arg(
        short,
        long,
        value_name = "DIR",
        required = false,
        required_unless_present = "dry_run",
        default_value_if("dry_run", "true", "result")
    )]
    pub(crate) output: PathBuf,
    /// Leave the stack out.
    #[arg(long)]
    pub(crate) no_stack: bool,
    /// Fit the limbs of a run before again, from its limbs.fits and without the frames: for a
    /// barometer, clock, camera angle or scale that turned out wrong.
    #[arg(long, value_name = "LIMBS")]
    pub(crate) limbs: Option<PathBuf>,
    /// Law of the surface's rotation with which the figure is compared, in place of the session's:
    /// middle, snodgrass-ulrich-1990, snodgrass-1983, howard-harvey-1970 or uniform.
    #[arg(long, value_name = "LAW")]
    pub(crate) rotation: Option<String>,
    /// Print result.json on stdout.
    #[arg(long)]
    pub(crate) json: bool,
    /// Read and check everything, try one frame of each sequence, say what would be done; write
    /// nothing.
    #[arg(long)]
    pub(crate) dry_run: bool,
    /// Seed of everything random.
    #[arg(long, default_value_t = 1)]
    pub(crate) seed: u64,
}

/// `truelimb seeing`.
#[derive(Args, Debug)]
pub(crate) struct Seeing {
    /// The session file.
    #[arg(value_name = "SESSION")]
    pub(crate) session: PathBuf,
    /// Folder for seeing.ecsv (a row a frame) and seeing.json; made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: Option<PathBuf>,
    /// Print JSON in place of the table.
    #[arg(long)]
    pub(crate) json: bool,
}

/// `truelimb simulate`.
#[derive(Args, Debug)]
pub(crate) struct Simulate {
    /// Folder for the session; made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: PathBuf,
    /// Scenario, TOML; every key that it leaves out is the demo's.
    #[arg(value_name = "SCENARIO")]
    pub(crate) scenario: Option<PathBuf>,
    /// Print JSON: the session file and the truth.
    #[arg(long)]
    pub(crate) json: bool,
    /// Seed of everything random.
    #[arg(long, default_value_t = 1)]
    pub(crate) seed: u64,
}

/// `truelimb compare`.
#[derive(Args, Debug)]
pub(crate) struct Compare {
    /// Results (folders or their result.json), the first of them first, and tables of values (CSV).
    #[arg(value_name = "RESULT|VALUES", required_unless_present = "template")]
    pub(crate) inputs: Vec<PathBuf>,
    /// Print an empty table of values with what each column holds.
    #[arg(long, conflicts_with = "inputs")]
    pub(crate) template: bool,
    /// Which edge all values are carried to: model, inflection, half-intensity, or fourier:WINDOW in
    /// arcsec.
    #[arg(long, default_value = "model", value_name = "DEFINITION")]
    pub(crate) to: String,
    /// Wavelength all values are carried to; the first result's without it.
    #[arg(long, value_name = "NM")]
    pub(crate) to_wavelength_nm: Option<f64>,
    /// Blur all values are carried to, full width at half maximum; for every definition but model.
    #[arg(long, value_name = "ARCSEC")]
    pub(crate) to_blur_arcsec: Option<f64>,
    /// How far apart the epochs of a pair from ground and space may be.
    #[arg(long, value_name = "DAYS", default_value_t = 1.0)]
    pub(crate) window_days: f64,
    /// Folder for comparison.json, comparison.html and figures; made when it is not there.
    #[arg(short, long, value_name = "DIR")]
    pub(crate) output: Option<PathBuf>,
    /// Print JSON.
    #[arg(long)]
    pub(crate) json: bool,
}

/// `truelimb limb`.
#[derive(Args, Debug)]
pub(crate) struct Limb {
    /// A FITS image of the whole disk.
    #[arg(value_name = "IMAGE")]
    pub(crate) image: PathBuf,
    /// Plane of a cube, from 0.
    #[arg(long, default_value_t = 0)]
    pub(crate) plane: usize,
    /// Wavelength: limb darkening and diffraction.
    #[arg(long, default_value_t = 550.0)]
    pub(crate) wavelength_nm: f64,
    /// Aperture: diffraction.
    #[arg(long, default_value_t = 0.15)]
    pub(crate) aperture_m: f64,
    /// Which edge is called the limb: template, inflection, half-intensity, or fourier:WINDOW in arcsec.
    #[arg(long, default_value = "template")]
    pub(crate) definition: String,
    /// Print JSON.
    #[arg(long)]
    pub(crate) json: bool,
}

/// `truelimb refraction`.
#[derive(Args, Debug)]
#[command(allow_negative_numbers = true)]
pub(crate) struct Refraction {
    /// Latitude, degrees, north positive.
    #[arg(long, value_name = "DEG")]
    pub(crate) latitude_deg: f64,
    /// Height above sea level, -400 to 45000 m.
    #[arg(long, value_name = "M")]
    pub(crate) height_m: f64,
    /// Pressure at the station, not reduced to sea level.
    #[arg(long, value_name = "HPA")]
    pub(crate) pressure_hpa: f64,
    /// Temperature of the free air.
    #[arg(long, value_name = "C")]
    pub(crate) temperature_c: f64,
    /// Relative humidity, a fraction from 0 to 1.
    #[arg(long, value_name = "FRACTION")]
    pub(crate) humidity: f64,
    /// Wavelengths in vacuum, separated by commas.
    #[arg(
        long,
        value_name = "NM",
        value_delimiter = ',',
        required = true,
        allow_hyphen_values = true
    )]
    pub(crate) wavelength_nm: Vec<f64>,
    /// Zenith distances, separated by commas; apparent unless --true.
    #[arg(
        long,
        value_name = "DEG",
        value_delimiter = ',',
        required = true,
        allow_hyphen_values = true
    )]
    pub(crate) zenith_deg: Vec<f64>,
    /// The zenith distances are true ones.
    #[arg(long = "true")]
    pub(crate) is_true: bool,
    /// Width of a flat band about each wavelength: rows at the effective wavelength, and the smear.
    #[arg(long, value_name = "NM")]
    pub(crate) width_nm: Option<f64>,
    /// Full width of the seeing, for the flattening that the smear of a band leaves.
    #[arg(long, value_name = "ARCSEC", default_value_t = 2.0)]
    pub(crate) seeing_arcsec: f64,
    /// Azimuth of the Sun, north through east: sets the Earth's radius of curvature.
    #[arg(long, value_name = "DEG", default_value_t = 180.0)]
    pub(crate) azimuth_deg: f64,
    /// Carbon dioxide.
    #[arg(long, value_name = "PPM", default_value_t = 420.0)]
    pub(crate) co2_ppm: f64,
    /// Fall of temperature with height in the troposphere.
    #[arg(long, value_name = "K", default_value_t = 6.5)]
    pub(crate) lapse_k_per_km: f64,
    /// Height of the tropopause above sea level.
    #[arg(long, value_name = "M", default_value_t = 11_000.0)]
    pub(crate) tropopause_m: f64,
    /// Refractivity of air: ciddor-1996, birch-downs-1994, owens-1967, iag-1999, mathar-2007.
    #[arg(long, value_name = "NAME", default_value = "ciddor-1996")]
    pub(crate) formula: String,
    /// What humidity is relative to: water-giacomo, water-iapws, ice-below-zero-iapws.
    #[arg(long, value_name = "NAME", default_value = "water-giacomo")]
    pub(crate) humidity_over: String,
    /// A sounding: CSV of `height_m`, `pressure_hpa`, `temperature_c`, `relative_humidity`.
    #[arg(long, value_name = "FILE")]
    pub(crate) profile: Option<PathBuf>,
    /// Print JSON.
    #[arg(long)]
    pub(crate) json: bool,
}
