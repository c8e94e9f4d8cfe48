//! What every stated figure must bring along: its basis.

use crate::diagnostics::Fault;
use crate::spec::reader::Reader;
use crate::spec::table::Table;

/// The `basis` of a table that states a figure; missing, it is a fault.
pub fn required(reader: &mut Reader<'_>, stated: &str) -> Option<String> {
    let basis = reader.text("basis");
    if basis.is_none() && !reader.has("basis") {
        let fault =
            Fault::wrong("basis-missing", format!("{} states {stated} without its basis", reader.table.name))
                .expected("basis = \"where the figure comes from\"")
                .repair("say where the figure comes from: an assessor will ask");
        reader.fault_at("basis", fault);
    }
    basis
}

/// Whether any of these keys is written.
pub fn any_of(table: &Table, keys: &[&str]) -> bool {
    keys.iter().any(|key| table.get(key).is_some())
}
