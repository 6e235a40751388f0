//! x
use drainwise::*;
use std::path::PathBuf;
struct P;
impl pipeline::Progress for P {
    fn stage(&self, _: &str) {}
}
fn main() {
    let a: Vec<String> = std::env::args().collect();
    let mut job = pipeline::Job::default();
    let mut i = 2;
    while i < a.len() {
        match a[i].as_str() {
            "--deck" => {
                job.decks.push(PathBuf::from(&a[i + 1]));
                i += 1
            }
            "--format" => i += 1,
            f => job.netlists.push(PathBuf::from(f)),
        }
        i += 1
    }
    let o = pipeline::lint(&load::Disk, &job, &P);
    let f: Vec<serde_json::Value> = o.report.diagnostics.iter().map(|d| { let p=o.sources.start(d.span); let fi=d.finding.as_ref(); serde_json::json!({"rule":d.code,"severity":d.severity.word(),"verdict":fi.map_or("violated",|f|f.verdict.word()),"message":d.message,"cell":fi.map(|f|f.cell.clone()),"device":fi.map(|f|f.device.clone()),"instances":fi.map(|f|f.instances),"worst":{"path":fi.map(|f|f.worst.path.clone())},"line":p.line,"file":o.sources.file(d.span.file).path(),"help":d.help,"waiver":null})}).collect();
    println!("{}", serde_json::to_string_pretty(&serde_json::json!({"findings":f})).unwrap());
    eprintln!("{:?}", o.report.summary);
    std::process::exit(if o.could_not {
        2
    } else if o.report.diagnostics.iter().any(|d| d.severity == diag::Severity::Error) {
        1
    } else {
        0
    });
}
