//! `truelimb report`: the report of a result drawn again.

use crate::Ending;
use crate::arguments::Report;
use crate::commands::{Failure, json, print};
use truelimb::pipeline::products;

/// `truelimb report`.
pub(crate) fn report(it: &Report) -> Result<Ending, Failure> {
    let rebuilt = products::rebuild(&it.folder)?;
    let page = it.folder.join("report.html");
    if it.json {
        print(&json(&serde_json::json!({
            "report": page,
            "files": rebuilt.files,
            "summary": rebuilt.record.summary,
        }))?);
    } else {
        print(&format!("report: {}", page.display()));
    }
    Ok(Ending::Done)
}
