//! `demo`: a worked study on invented data, built into the program.

use super::output::{Failure, Terminal};
use super::{DONE, main};
use crate::record::error::StudyError;
use crate::world::{Kind, Links};
use std::path::{Path, PathBuf};

const PLAN: &str = include_str!("../../plans/wrist-study.yaml");
const VISITS: &str = include_str!("../../demo-data/wrist-study/visits.csv");
const ALLOCATION: &str = include_str!("../../demo-data/wrist-study/allocation.csv");

pub(super) fn demo(terminal: &Terminal<'_>, folder: &Path) -> Result<u8, Failure> {
    let inputs = inputs_folder(folder)?;
    for place in [folder, &inputs] {
        if !matches!(terminal.world.kind(place, Links::Report), Ok(Kind::Nothing)) {
            return Err(Failure::other(
                format!("something stands at `{}`", place.display()),
                "nothing is overwritten: name another folder, or remove it",
            ));
        }
    }
    let failed = |source| Failure::Study(StudyError::Machine { doing: "write", place: inputs.display().to_string(), source });
    terminal.world.create_folder(&inputs).map_err(failed)?;
    for (name, text) in [("plan.yaml", PLAN), ("visits.csv", VISITS), ("allocation.csv", ALLOCATION)] {
        terminal.world.write_new(&inputs.join(name), text.as_bytes()).map_err(failed)?;
    }
    terminal.answer(&format!(
        "An invented study: coached or booklet exercises after a wrist fracture. No such trial was run.\nIts plan, data and allocation are now in {}.\n",
        inputs.display()
    ));
    let (study, plan) = (folder.to_path_buf(), inputs.join("plan.yaml"));
    let (visits, allocation) = (inputs.join("visits.csv"), inputs.join("allocation.csv"));
    let flag = |flag: &str| PathBuf::from(flag);
    let steps: [(&str, Vec<PathBuf>); 5] = [
        ("The plan is compiled.", vec![flag("check"), plan.clone()]),
        ("It is sealed, before anyone knows who had which arm.", vec![flag("seal"), plan, flag("--study"), study.clone()]),
        (
            "The data are in: they are checked without opening the arms.",
            vec![flag("check"), study.clone(), flag("--data"), visits.clone(), flag("--allocation"), allocation.clone()],
        ),
        (
            "The arms are opened and the plan is executed as sealed.",
            vec![flag("run"), study.clone(), flag("--data"), visits, flag("--allocation"), allocation],
        ),
        ("Anyone can verify it from the folder alone.", vec![flag("audit"), study]),
    ];
    for (what, command) in steps {
        let shown: Vec<String> = command.iter().map(|part| quoted(&part.display().to_string())).collect();
        terminal.answer(&format!("\n{what}\n$ aforesaid {}\n", shown.join(" ")));
        let status = main(terminal.world, command.into_iter().map(PathBuf::into_os_string).collect());
        if status != DONE {
            return Ok(status);
        }
    }
    Ok(DONE)
}

/// Beside the study folder, since every file in that is accounted for.
fn inputs_folder(folder: &Path) -> Result<PathBuf, Failure> {
    match folder.file_name() {
        Some(name) => {
            let mut name = name.to_os_string();
            name.push("-inputs");
            Ok(folder.with_file_name(name))
        }
        None => {
            Err(Failure::other(format!("`{}` has no name to make a folder of", folder.display()), "name a folder that does not exist yet"))
        }
    }
}

fn quoted(text: &str) -> String {
    if text.contains(char::is_whitespace) { format!("\"{text}\"") } else { text.to_owned() }
}
