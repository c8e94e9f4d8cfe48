//! Where the files that a spec names are really read: an audit reads the copies in the review's folder.

use crate::plan::{FileRef, Plan, TemplateChoice, Whence};
use std::collections::BTreeMap;
use std::path::{Path, PathBuf};

/// Real places by the path that a spec's text leads to; any other path is its own place.
#[derive(Debug, Clone, Default, PartialEq, Eq)]
pub struct Places(BTreeMap<PathBuf, PathBuf>);

impl Places {
    pub fn put(&mut self, named: impl Into<PathBuf>, real: impl Into<PathBuf>) {
        self.0.insert(named.into(), real.into());
    }

    pub fn real(&self, named: &Path) -> PathBuf {
        self.0.get(named).cloned().unwrap_or_else(|| named.to_path_buf())
    }

    /// Leads every file of a plan to its real place; names stay as written.
    pub fn redirect(&self, plan: &mut Plan) {
        let lead = |file: &mut FileRef| file.path = self.real(&file.path);
        for source in &mut plan.sources {
            if let Whence::Files(files) = &mut source.from {
                files.iter_mut().for_each(lead);
            }
        }
        for linked in &mut plan.linked {
            [&mut linked.stamp_json, &mut linked.answers, &mut linked.handover].into_iter().for_each(lead);
        }
        if let Some(overrides) = &mut plan.overrides {
            lead(&mut overrides.file);
        }
        if let TemplateChoice::Own(file) = &mut plan.report.template {
            lead(file);
        }
    }
}
