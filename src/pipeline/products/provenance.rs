//! Where a result came from, as PROV-JSON: which files went in, which came out, by what program
//! with what settings.
//!
//! Source of the form: "The PROV-JSON Serialization", W3C Member Submission, 24 April 2013; the
//! meaning of its words: "PROV-DM", W3C Recommendation, 30 April 2013. Files are named by number
//! and carry their path as a label, since a path may hold what a name may not. Nothing here tells
//! the time of day, the machine or the number of threads: the same input gives the same bytes.

use std::path::Path;

use serde_json::{Map, Value, json};

use crate::frames::{sha256, sha256_of};
use crate::pipeline::Error;
use crate::result::record::{Record, SourceFile};

/// The namespace of the names made here; a name, not an address.
const NAMESPACE: &str = "urn:truelimb:provenance:";

/// Checksums of the products by their names in the folder, and of `result.json` from its text.
pub(super) fn products(
    folder: &Path,
    names: &[String],
    result: &str,
) -> Result<Vec<SourceFile>, Error> {
    let mut all = names
        .iter()
        .map(|it| product(folder, it))
        .collect::<Result<Vec<_>, _>>()?;
    all.push(SourceFile {
        path: "result.json".to_owned(),
        bytes: result.len() as u64,
        sha256: sha256_of(result.as_bytes()),
    });
    Ok(all)
}

/// Size and checksum of one product.
pub(super) fn product(folder: &Path, name: &str) -> Result<SourceFile, Error> {
    let path = folder.join(name);
    let bytes = std::fs::metadata(&path)
        .map_err(|it| Error::File {
            path: path.clone(),
            what: "could not be read",
            reason: it.to_string(),
        })?
        .len();
    Ok(SourceFile {
        path: name.to_owned(),
        bytes,
        sha256: sha256(&path)?,
    })
}

/// The whole document.
pub(super) fn document(record: &Record, products: &[SourceFile]) -> Value {
    let mut entities = Map::new();
    let mut used = Map::new();
    let mut generated = Map::new();
    let mut derived = Map::new();
    let run = "tl:reduction";
    for (index, it) in record.created_from.iter().enumerate() {
        let id = format!("tl:input-{}", index + 1);
        used.insert(
            format!("_:used-{}", index + 1),
            json!({ "prov:activity": run, "prov:entity": id }),
        );
        entities.insert(id, file(it, "input"));
    }
    let id = |path: &str| {
        products
            .iter()
            .position(|it| it.path == path)
            .map(|it| format!("tl:product-{}", it + 1))
    };
    for (index, it) in products.iter().enumerate() {
        let own = format!("tl:product-{}", index + 1);
        generated.insert(
            format!("_:generated-{}", index + 1),
            json!({ "prov:entity": own, "prov:activity": run }),
        );
        // Page and figures are drawn from the result and from nothing else but its traces.
        if it.path == "report.html" || it.path.starts_with("figures/") {
            for from in ["result.json", "traces.json"]
                .iter()
                .filter_map(|it| id(it))
            {
                derived.insert(
                    format!("_:derived-{}", derived.len() + 1),
                    json!({ "prov:generatedEntity": own, "prov:usedEntity": from }),
                );
            }
        }
        entities.insert(own, file(it, "product"));
    }
    let settings = record.settings.to_string();
    json!({
        "prefix": { "tl": NAMESPACE },
        "entity": entities,
        "activity": { run: {
            "prov:label": format!("reduction of a session at {}", record.site_name),
            "prov:type": name("tl:reduction"),
            "tl:observed_from_utc": record.time_utc[0],
            "tl:observed_to_utc": record.time_utc[1],
            "tl:seed": record.seed.to_string(),
            "tl:settings": settings,
            "tl:settings_sha256": sha256_of(settings.as_bytes()),
        }},
        "agent": { "tl:program": {
            "prov:label": format!("truelimb {}", record.program_version),
            "prov:type": name("prov:SoftwareAgent"),
            "tl:version": record.program_version,
        }},
        "used": used,
        "wasGeneratedBy": generated,
        "wasDerivedFrom": derived,
        "wasAssociatedWith": { "_:associated-1": {
            "prov:activity": run,
            "prov:agent": "tl:program",
        }},
    })
}

fn file(it: &SourceFile, kind: &str) -> Value {
    json!({
        "prov:label": it.path,
        "prov:type": name(&format!("tl:{kind}")),
        "tl:bytes": it.bytes,
        "tl:sha256": it.sha256,
    })
}

/// A qualified name as a value.
fn name(qualified: &str) -> Value {
    json!({ "$": qualified, "type": "prov:QUALIFIED_NAME" })
}

/// Puts the present size and checksum of a product into a document that was read.
pub(super) fn renew(document: &mut Value, product: &SourceFile) {
    let Some(entities) = document.get_mut("entity").and_then(Value::as_object_mut) else {
        return;
    };
    for (id, entity) in entities {
        if id.starts_with("tl:product-") && entity["prov:label"] == product.path.as_str() {
            entity["tl:bytes"] = json!(product.bytes);
            entity["tl:sha256"] = json!(product.sha256);
        }
    }
}
