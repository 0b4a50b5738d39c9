//! What each command does.

use super::args::{Args, Command, Format, Sitting};
use super::failure::Failure;
use super::{out, table};
use crate::analysis::analyse_with;
use crate::app::{Look, Wide};
use crate::assay::{Lab, PlotGlyphs, Sheet, Titration, Tube, TubeNo};
use crate::figure::{Glyphs, Plot};
use crate::notebook::{Notebook, What};
use crate::report::{self, Page};
use crate::shell::{self, First, demos};
use crate::store::format::MOST_BYTES;
use crate::store::{self, Holder};
use crate::units::clean;
use clap::CommandFactory;
use std::env;
use std::fs;
use std::io::{self, IsTerminal, Read};
use std::path::Path;
use std::process::ExitCode;

/// The width of what is printed.
const PAGE_WIDTH: usize = 80;

pub(super) fn run(args: Args) -> Result<ExitCode, Failure> {
    let Some(command) = args.command else {
        start()?;
        return Ok(ExitCode::SUCCESS);
    };
    match command {
        Command::New { example: true, .. } => out::result(Sheet::EXAMPLE)?,
        Command::New {
            file,
            from,
            operator,
            ..
        } => {
            let (Some(file), Some(from)) = (file, from) else {
                return Err(Failure::new(
                    Failure::USAGE,
                    "new wants a FILE and --from PROTOCOL.ron",
                ));
            };
            new(&file, &from, operator)?;
        }
        Command::Open { file, sitting } => open(&file, sitting)?,
        Command::Take {
            file,
            readings,
            recount,
            operator,
        } => {
            take(&file, readings.as_deref(), recount, operator)?;
        }
        Command::Summary {
            file,
            format,
            ascii,
            all_laws,
            working,
        } => {
            let look = Printed {
                format,
                ascii,
                all_laws,
                working,
            };
            summary(&file, &look)?;
        }
        Command::Check { file } => return check(&file),
        Command::Demo { list: true, .. } => {
            let lines: Vec<String> = demos::all()
                .map(|d| format!("{:<12} {} (invented)\n", d.name, d.about))
                .collect();
            out::result(&lines.concat())?;
        }
        Command::Demo { name, sitting, .. } => demo(name.as_deref(), sitting)?,
    }
    Ok(ExitCode::SUCCESS)
}

/// Who is at the keyboard, as far as can be told.
fn operator(named: Option<String>, usual: &str) -> String {
    let somebody = |s: &String| !s.trim().is_empty();
    named
        .filter(somebody)
        .or_else(|| Some(usual.to_string()).filter(somebody))
        .or_else(|| env::var("USER").ok().filter(somebody))
        .or_else(|| env::var("LOGNAME").ok().filter(somebody))
        .unwrap_or_else(|| Lab::NOBODY.into())
}

/// The lab's settings. Ones that cannot be read are said and not used: they are defaults and nothing more.
fn lab() -> Lab {
    let Some(places) = store::places() else {
        return Lab::default();
    };
    store::lab(&places).unwrap_or_else(|e| {
        out::talk(&format!("rackside: {e}; the usual settings are used"));
        Lab::default()
    })
}

/// How a source is called in a message.
fn called(path: &Path) -> String {
    if path == Path::new("-") {
        "standard input".into()
    } else {
        path.display().to_string()
    }
}

fn read_text(path: &Path) -> Result<String, Failure> {
    let name = called(path);
    let io = |e: io::Error| Failure::new(Failure::IO, format!("{name}: {e}"));
    let bad = |what: &str| Failure::new(Failure::DATA, format!("{name}: {what}"));
    let source: Box<dyn Read> = if path == Path::new("-") {
        Box::new(io::stdin().lock())
    } else {
        // A pipe is as good as a file here; a folder is not.
        if fs::metadata(path).map_err(io)?.is_dir() {
            return Err(bad("not a file"));
        }
        Box::new(fs::File::open(path).map_err(io)?)
    };
    let mut bytes = Vec::new();
    source
        .take(MOST_BYTES as u64 + 1)
        .read_to_end(&mut bytes)
        .map_err(io)?;
    if bytes.len() > MOST_BYTES {
        return Err(bad(&format!(
            "too large; at most {MOST_BYTES} bytes are read"
        )));
    }
    String::from_utf8(bytes).map_err(|_| bad("not a text in UTF-8"))
}

fn new(file: &Path, from: &Path, named: Option<String>) -> Result<(), Failure> {
    let bad = |what: String| {
        Failure::new(Failure::DATA, format!("{}: {what}", from.display()))
            .hint("`rackside new --example` prints a protocol that works")
    };
    let sheet = Sheet::parse(&read_text(from)?).map_err(|e| bad(e.to_string()))?;
    let t = sheet.titration().map_err(|e| bad(e.to_string()))?;
    let who = match operator(named, &lab().operator) {
        who if who == Lab::NOBODY && !t.protocol.operator.trim().is_empty() => {
            t.protocol.operator.clone()
        }
        who => who,
    };
    let since = shell::now();
    let notebook = Notebook::open(t.protocol, t.levels, t.tubes, since, &who)
        .map_err(|e| bad(e.to_string()))?;
    let opened = store::create(file, notebook, &Holder { who, since })?;
    let t = opened.notebook.titration();
    out::talk(&format!(
        "{}: {} levels, {} vials; to the bench with `rackside open {}`",
        file.display(),
        t.levels.len(),
        t.tubes.len(),
        file.display()
    ));
    Ok(())
}

/// Says on stderr that a file was changed.
fn say_changed(path: &Path, opened: &store::Opened) {
    if let Some(said) = opened.changed_in_words() {
        out::talk(&format!("{}: {said}", path.display()));
    }
}

fn open(path: &Path, sitting: Sitting) -> Result<(), Failure> {
    if !on_a_terminal() {
        return Err(Failure::new(
            Failure::USAGE,
            "open wants a terminal on standard input and output",
        )
        .hint("`rackside take` and `rackside summary` work without one"));
    }
    sit(path, sitting)
}

fn on_a_terminal() -> bool {
    io::stdin().is_terminal() && io::stdout().is_terminal()
}

fn sit(path: &Path, sitting: Sitting) -> Result<(), Failure> {
    let lab = lab();
    let who = operator(sitting.operator, &lab.operator);
    let (opened, notices) = shell::open(path, &who)?;
    say_changed(path, &opened);
    let look = look(sitting.ascii, &lab);
    printed(shell::sit(
        First::Titration(Box::new(opened), notices),
        who,
        lab,
        look,
    )?)
}

fn start() -> Result<(), Failure> {
    if !on_a_terminal() {
        return Err(Failure::new(
            Failure::USAGE,
            "the start screen wants a terminal on standard input and output",
        )
        .hint(format!(
            "{}
  `rackside --help` lists what works without one",
            Args::command().render_usage()
        )));
    }
    let lab = lab();
    let who = operator(None, &lab.operator);
    let look = look(false, &lab);
    printed(shell::sit(First::Start, who, lab, look)?)
}

/// Prints a page that was asked for at the bench.
fn printed(page: Option<String>) -> Result<(), Failure> {
    page.map_or(Ok(()), |page| out::result(&page))
}

/// How the screen begins: fine characters where the locale and the terminal have them.
fn look(ascii: bool, lab: &Lab) -> Look {
    let fine = match lab.glyphs {
        PlotGlyphs::Fine => !ascii,
        PlotGlyphs::Plain => false,
        PlotGlyphs::Automatic => glyphs(ascii) == Glyphs::Braille,
    };
    let (columns, rows) = shell::size();
    Look {
        fine,
        plot: Plot::default(),
        log_axis: true,
        wide: Wide::RackAndPlot,
        columns,
        rows,
    }
}

fn glyphs(ascii: bool) -> Glyphs {
    let set = |name: &str| env::var(name).ok().filter(|v| !v.is_empty());
    let locale = set("LC_ALL")
        .or_else(|| set("LC_CTYPE"))
        .or_else(|| set("LANG"))
        .unwrap_or_default();
    let utf8 = locale
        .to_ascii_lowercase()
        .replace('-', "")
        .contains("utf8");
    let poor = matches!(set("TERM").as_deref(), Some("dumb" | "linux" | "vt100"));
    if ascii || !utf8 || poor {
        Glyphs::Ascii
    } else {
        Glyphs::Braille
    }
}

fn take(
    path: &Path,
    readings: Option<&Path>,
    recount: bool,
    named: Option<String>,
) -> Result<(), Failure> {
    let source = readings.unwrap_or(Path::new("-"));
    let text = read_text(source)?;
    let name = called(source);
    let since = shell::now();
    let who = operator(named, &lab().operator);
    let mut opened = store::open_for_writing(
        path,
        &Holder {
            who: who.clone(),
            since,
        },
    )?;
    say_changed(path, &opened);
    let counts = table::readings(&text, &name, opened.notebook.titration(), recount, since)?;
    let n = counts.len();
    let entry = opened
        .notebook
        .record(What::Counted { readings: counts }, since, &who)
        .map_err(|e| Failure::new(Failure::DATA, format!("{name}: {e}; nothing was taken")))?;
    opened
        .text
        .append(&entry)
        .map_err(|e| Failure::new(Failure::DATA, format!("{name}: {e}; nothing was taken")))?;
    let store::Access::Write(mut target) = opened.access else {
        return Err(Failure::new(
            Failure::IO,
            format!("{}: not opened for writing", path.display()),
        ));
    };
    target.save(&opened.text)?;
    let (read, all) = opened.notebook.titration().progress();
    let readings = if n == 1 { "reading" } else { "readings" };
    out::talk(&format!(
        "{}: {n} {readings} taken; {read} of {all} vials read",
        path.display()
    ));
    Ok(())
}

/// How a summary is asked for.
struct Printed {
    format: Format,
    ascii: bool,
    all_laws: bool,
    working: Option<Option<u32>>,
}

fn page(opened: &store::Opened, look: &Printed) -> Result<String, Failure> {
    let t = opened.notebook.titration();
    let of = working_of(t, look)?;
    let analysis = analyse_with(t, look.all_laws);
    if look.format == Format::Json {
        return report::json(t, &analysis).map_err(|e| Failure::new(1, e.to_string()));
    }
    let mut text = report::text(&Page {
        notebook: &opened.notebook,
        analysis: &analysis,
        digest: opened.text.digest(),
        changed: &opened.changed,
        version: env!("CARGO_PKG_VERSION"),
        glyphs: glyphs(look.ascii),
    });
    for tube in of {
        text.push('\n');
        for line in report::working::lines(t, &analysis, tube, PAGE_WIDTH) {
            text.push_str(&line);
            text.push('\n');
        }
    }
    Ok(text)
}

/// The tubes whose working is asked for.
fn working_of<'t>(t: &'t Titration, look: &Printed) -> Result<Vec<&'t Tube>, Failure> {
    let Some(asked) = look.working else {
        return Ok(Vec::new());
    };
    if look.format == Format::Json {
        return Err(Failure::new(
            Failure::USAGE,
            "--working is of the page and not of JSON",
        ));
    }
    match asked {
        None => Ok(t.tubes.iter().collect()),
        Some(no) => t
            .tube(TubeNo(no))
            .map(|tube| vec![tube])
            .ok_or_else(|| Failure::new(Failure::USAGE, format!("there is no vial {no}"))),
    }
}

fn summary(path: &Path, look: &Printed) -> Result<(), Failure> {
    let opened = store::open(path)?;
    say_changed(path, &opened);
    out::result(&page(&opened, look)?)
}

fn check(path: &Path) -> Result<ExitCode, Failure> {
    let opened = store::open(path)?;
    let (read, all) = opened.notebook.titration().progress();
    let chain = if opened.changed.is_empty() {
        "as rackside wrote it"
    } else {
        "CHANGED OUTSIDE RACKSIDE"
    };
    out::result(&format!(
        "{}: {chain}; {} entries, digest {}; {read} of {all} vials read\n",
        clean(&path.display().to_string()),
        opened.notebook.revision(),
        opened.text.digest()
    ))?;
    if opened.changed.is_empty() {
        return Ok(ExitCode::SUCCESS);
    }
    say_changed(path, &opened);
    Ok(ExitCode::from(Failure::DATA))
}

fn demo(name: Option<&str>, sitting: Sitting) -> Result<(), Failure> {
    let demo = demos::find(name).ok_or_else(|| {
        let names: Vec<&str> = demos::all().map(|d| d.name).collect();
        let name = name.unwrap_or_default();
        Failure::new(
            Failure::USAGE,
            format!("there is no demo `{name}`; there are {}", names.join(", ")),
        )
    })?;
    if on_a_terminal() {
        let path = demos::copy(&demo)?;
        return sit(&path, sitting);
    }
    let opened = store::carried(demo.name, demo.text)?;
    let look = Printed {
        format: Format::Text,
        ascii: sitting.ascii,
        all_laws: false,
        working: None,
    };
    out::result(&page(&opened, &look)?)
}
