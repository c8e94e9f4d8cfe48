//! A spec from a few lines, and the program's answers to it.

use reassay::json::Json;
use std::fs;
use std::path::Path;
use std::process::Command;

/// A spec in the making. The readings are of period 2025.
#[derive(Debug, Clone, Default)]
pub struct Spec {
    log: bool,
    /// The period under review, where it is not 2025.
    reviewed: Option<&'static str>,
    summaries: Vec<String>,
    readings: String,
    within: String,
    prior: String,
    questions: String,
}

pub fn linear() -> Spec {
    Spec::default()
}

pub fn log() -> Spec {
    Spec { log: true, ..Spec::default() }
}

impl Spec {
    /// The period under review as a summary row: `n = 5, mean = 29.2, sd = 4.6`.
    pub fn summary(self, row: impl AsRef<str>) -> Spec {
        self.period(2025, row)
    }

    pub fn period(mut self, period: i32, row: impl AsRef<str>) -> Spec {
        self.summaries.push(format!("{{ period = {period}, {} }}", row.as_ref()));
        self
    }

    /// One period before another, 2024 being the last.
    pub fn earlier(self, rows: &[String]) -> Spec {
        let first = 2025 - rows.len() as i32;
        rows.iter().zip(first..).fold(self, |spec, (row, period)| spec.period(period, row))
    }

    pub fn values(self, values: &[String]) -> Spec {
        self.values_in(2025, values)
    }

    /// Single readings; what is no number, such as "<6", is quoted.
    pub fn values_in(mut self, period: i32, values: &[String]) -> Spec {
        let cell =
            |text: &String| if text.starts_with(['<', '>']) { format!("{text:?}") } else { text.clone() };
        let cells: Vec<String> = values.iter().map(cell).collect();
        self.readings += &format!("[[readings]]\nin_period = {period}\nvalues = [{}]\n", cells.join(", "));
        self
    }

    /// Another name of the period under review: one that is no year.
    pub fn reviewed(mut self, period: &'static str) -> Spec {
        self.reviewed = Some(period);
        self
    }

    /// A file of readings, with the keys that read it.
    pub fn file(mut self, keys: &str) -> Spec {
        self.readings += &format!("[[readings]]\n{keys}\n");
        self
    }

    pub fn within(mut self, from: &str) -> Spec {
        self.within = format!("from = \"{from}\"");
        self
    }

    pub fn within_sd(self, sd: f64) -> Spec {
        self.within_worth(sd, "inf")
    }

    pub fn within_worth(mut self, sd: f64, df: &str) -> Spec {
        let key = if self.log { "log_sd" } else { "sd" };
        self.within = format!("from = \"stated\"\n{key} = {sd:?}\ndf = {df}\nbasis = \"the case\"");
        self
    }

    pub fn flat(self) -> Spec {
        self.prior("from = \"flat\"")
    }

    pub fn stated(self, mean: f64, sd: f64) -> Spec {
        let (mean_key, sd_key) = if self.log { ("log_mean", "log_sd") } else { ("mean", "sd") };
        self.prior(&format!(
            "from = \"stated\"\n{mean_key} = {mean:?}\n{sd_key} = {sd:?}\nbasis = \"the case\""
        ))
    }

    pub fn worth(self, mean: f64, readings: f64) -> Spec {
        let key = if self.log { "log_mean" } else { "mean" };
        self.prior(&format!(
            "from = \"stated\"\n{key} = {mean:?}\nworth_readings = {readings:?}\nbasis = \"the case\""
        ))
    }

    /// A history prior, with what is said of the between sd: `between = "none"`.
    pub fn history(self, keys: &str) -> Spec {
        self.prior(&format!("from = \"history\"\n{keys}"))
    }

    pub fn prior(mut self, keys: &str) -> Spec {
        self.prior = keys.to_owned();
        self
    }

    pub fn ask(mut self, id: &str, keys: &str) -> Spec {
        self.questions += &format!("[[question]]\nid = \"{id}\"\nask = {keys}\n");
        self
    }

    fn text(&self, id: usize) -> String {
        let scale = if self.log { "log" } else { "linear" };
        let summaries = if self.summaries.is_empty() {
            String::new()
        } else {
            format!("[[summaries]]\nrows = [\n{}\n]\n", self.summaries.join(",\n"))
        };
        format!(
            "[review]\ntitle = \"A published case\"\nid = \"case-{id}\"\nperiod = \"{}\"\ndate = 2026-01-01\n\
             [quantity]\nname = \"x\"\nunit = \"1\"\nscale = \"{scale}\"\n\
             {}{summaries}[within]\n{}\n[prior]\n{}\n[series.x]\nlabel = \"x\"\n{}\
             [report]\nformats = [\"md\"]\ndetail = \"none\"\ninputs = \"hashed\"\n",
            self.reviewed.unwrap_or("2025"),
            self.readings,
            self.within,
            self.prior,
            self.questions
        )
    }
}

/// What the program answers to each spec. `test` names a folder of its own; `files` are put beside the specs.
pub fn answers_beside(test: &str, files: &[(&str, String)], specs: &[Spec]) -> Vec<Answers> {
    let folder = Path::new(env!("CARGO_TARGET_TMPDIR")).join("published").join(test);
    let _ = fs::remove_dir_all(&folder);
    fs::create_dir_all(&folder).expect("a folder");
    for (name, text) in files {
        fs::write(folder.join(name), text).expect("a file is written");
    }
    let names: Vec<String> = (0..specs.len()).map(|at| format!("case-{at}.toml")).collect();
    for (at, (name, spec)) in names.iter().zip(specs).enumerate() {
        fs::write(folder.join(name), spec.text(at)).expect("a spec is written");
    }
    let run = Command::new(env!("CARGO_BIN_EXE_reassay"))
        .current_dir(&folder)
        .args(["report", "--quiet", "--jobs", "1"])
        .args(&names)
        .output()
        .expect("the program runs");
    assert!(run.status.success(), "{test}: {}", String::from_utf8_lossy(&run.stderr));
    (0..specs.len())
        .map(|at| {
            let path = folder.join(format!("reviews/case-{at}/answers.json"));
            let bytes = fs::read(&path).unwrap_or_else(|error| panic!("{}: {error}", path.display()));
            Answers(Json::read(&bytes).expect("answers.json is JSON"))
        })
        .collect()
}

pub fn answers(test: &str, specs: &[Spec]) -> Vec<Answers> {
    answers_beside(test, &[], specs)
}

/// The answers of one spec.
pub fn answer(test: &str, spec: Spec) -> Answers {
    answers(test, &[spec]).remove(0)
}

/// An answers.json.
#[derive(Debug)]
pub struct Answers(Json);

impl Answers {
    /// A figure of the only series, by its path: "answers/level/lower", "checks/homogeneity/p". In a list the
    /// item with that `id` is meant, or that place.
    pub fn at(&self, path: &str) -> f64 {
        let series =
            self.0.get("series").and_then(Json::as_list).and_then(|all| all.first()).expect("a series");
        let found = path.split('/').try_fold(series, |json, key| match json {
            Json::List(items) => {
                let named = items.iter().find(|item| item.get("id").and_then(Json::as_text) == Some(key));
                named.or_else(|| items.get(key.parse::<usize>().ok()?))
            }
            other => other.get(key),
        });
        found.and_then(Json::as_f64).unwrap_or_else(|| panic!("no {path}: {found:?} in {}", series.to_line()))
    }
}
