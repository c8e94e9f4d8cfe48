//! From a spec to a review's files in memory, for `report` and `audit` alike.

use crate::data;
use crate::diagnostics::{Fault, Outcome};
use crate::findings::Findings;
use crate::plan::{self, Plan, TemplateChoice};
use crate::report::{self, Rendered, StampText};
use crate::review::{self, Prepared};
use crate::source::{self, sha256_hex};
use crate::stamp::audit::Again;
use crate::stamp::inputs::{self, Input};
use crate::stamp::made::SPEC_TOML;
use crate::stamp::stamp_json::{PROGRAM, VERSION};
use crate::stamp::{Made, Stamp, Texts};
use std::path::Path;

/// Spec and plan, every file led to its place.
pub fn prepare(again: &Again, shown: &str) -> Outcome<Prepared> {
    let read = |path: &Path| -> Result<Vec<u8>, Fault> {
        source::whole(&again.places.real(path), &path.to_string_lossy(), "reading the spec")
    };
    let mut prepared = review::prepare_by(&again.spec, shown, &read, &|plan| again.places.redirect(plan))?;
    name_as_kept(&mut prepared.plan);
    Ok(prepared)
}

/// From here on the spec has the name of its copy in the review's folder, and the base the name that
/// the spec gives it: the user's own path to them must not reach any file of the review.
fn name_as_kept(plan: &mut Plan) {
    let base_names: Vec<String> =
        plan.spec_files.iter().map(|file| inputs::written_from(plan, &file.path)).collect();
    for (place, (file, name)) in plan.spec_files.iter_mut().zip(base_names).enumerate() {
        file.name = if place == 0 { SPEC_TOML.to_string() } else { name };
    }
}

/// The findings, and the review's files.
pub fn make(again: &Again, shown: &str, jobs: usize) -> Outcome<(Findings, Made)> {
    let prepared = prepare(again, shown)?;
    let data = data::read(&prepared.plan)?;
    let findings = review::review(prepared, data, jobs)?;
    let texts = Texts {
        plan_toml: plan::plan_toml(&findings.plan, &filled(&findings)),
        readings_csv: data::rows_csv(&findings.data, &findings.plan),
    };
    let made = Made::of(&findings, texts, &render)?;
    Ok((findings, made))
}

/// The keys of priors, within sds and questions with their defaults, for plan.toml.
fn filled(findings: &Findings) -> Vec<(String, Vec<(String, String)>)> {
    let owned = |keys: &[(&'static str, String)]| -> Vec<(String, String)> {
        keys.iter().map(|(key, value)| (key.to_string(), value.clone())).collect()
    };
    let mut filled: Vec<(String, Vec<(String, String)>)> =
        findings.settings.iter().map(|(path, keys)| (path.clone(), owned(keys))).collect();
    for answer in findings.series.iter().flat_map(|series| &series.answers) {
        let table = format!("question.{}", answer.id);
        if !filled.iter().any(|(known, _)| *known == table) {
            filled.push((table, owned(&answer.settings)));
        }
    }
    filled
}

fn render(findings: &Findings, stamp: &Stamp, inputs: &[Input]) -> Outcome<Rendered> {
    let plan = &findings.plan;
    let spec = plan.spec_files.first().map(|spec| (spec.name.clone(), sha256_hex(&spec.bytes)));
    let others = inputs.iter().map(|input| (input.written.clone(), input.sha256.clone()));
    let text = StampText {
        whole: stamp.whole().to_string(),
        label: stamp.label(),
        inputs: spec.into_iter().chain(others).collect(),
        program: format!("{PROGRAM} {VERSION}"),
    };
    let TemplateChoice::Own(template) = &plan.report.template else {
        return report::render(findings, &text, None);
    };
    let bytes = source::whole(&template.path, &template.written, "reading the template")?;
    let sha256 = sha256_hex(&bytes);
    // What is rendered must be what was stamped.
    if !inputs.iter().any(|input| input.role == "template" && input.sha256 == sha256) {
        return Err(inputs::changed(&template.written).into());
    }
    report::render(findings, &text, Some((&template.written, &bytes)))
}
