//! Reading the sheet, writing the record.

use crate::sheet::{self, DataFile, MOST_BYTES};
use std::fs::{self, File};
use std::io::{Read, Write};
use std::path::Path;

/// What went wrong with a file, and what to do.
pub(super) struct Failure {
    pub message: String,
    pub hint: Option<&'static str>,
}

impl Failure {
    fn new(message: String, hint: Option<&'static str>) -> Self {
        Self { message, hint }
    }
}

/// The text of a sheet; `-` is standard input. A file above the limit is refused without being read whole.
pub(super) fn sheet(name: &str) -> Result<String, Failure> {
    let mut bytes = Vec::new();
    let limit = MOST_BYTES as u64 + 1;
    let read = if name == "-" {
        std::io::stdin().lock().take(limit).read_to_end(&mut bytes)
    } else {
        File::open(name).and_then(|f| f.take(limit).read_to_end(&mut bytes))
    };
    if let Err(error) = read {
        let hint = (error.kind() == std::io::ErrorKind::NotFound).then_some("check the name and the folder");
        return Err(Failure::new(format!("{name} cannot be read: {error}"), hint));
    }
    if bytes.len() > MOST_BYTES {
        let message = format!("{name} is larger than {MOST_BYTES} bytes, the limit of a sheet");
        return Err(Failure::new(message, Some("is this the right file?")));
    }
    String::from_utf8(bytes).map_err(|error| {
        let at = error.utf8_error().valid_up_to();
        let before = error.as_bytes().get(..at).unwrap_or(&[]);
        let line = before.iter().filter(|b| **b == b'\n').count() + 1;
        Failure::new(format!("{name} is not UTF-8 text: line {line}"), Some("save it with the encoding UTF-8"))
    })
}

/// Largest data file, in bytes.
const MOST_DATA: u64 = 4_000_000;

/// A whole file, unless it is larger than `most` bytes; else why not.
pub(super) fn bytes(path: &Path, most: u64) -> Result<Vec<u8>, String> {
    let mut bytes = Vec::new();
    let opened = File::open(path).and_then(|f| f.take(most + 1).read_to_end(&mut bytes));
    opened.map_err(|error| format!("cannot be read: {error}"))?;
    if bytes.len() as u64 > most {
        return Err(format!("is larger than {most} bytes, the limit of such a file"));
    }
    Ok(bytes)
}

/// The data files that a sheet names; their names are relative to the sheet.
pub(super) fn data(name: &str, text: &str) -> Vec<DataFile> {
    let folder = Path::new(name).parent().unwrap_or(Path::new(""));
    let read = |file: &str| -> Result<String, String> {
        String::from_utf8(bytes(&folder.join(file), MOST_DATA)?).map_err(|_| "is not UTF-8 text".to_owned())
    };
    let content = |file: String| DataFile { content: read(&file), name: file };
    sheet::files(text).into_iter().map(content).collect()
}

/// Writes the files of a record. All are written under temporary names first and then renamed one by one: a file is
/// there whole or not at all, and if one cannot be written none appears.
pub(super) fn write_record(folder: &Path, files: &[(String, Vec<u8>)]) -> Result<(), Failure> {
    let hint = Some("choose a folder that can be written");
    let failed = |path: &Path, error: &std::io::Error| {
        Failure::new(format!("the record cannot be written: {}: {error}", path.display()), hint)
    };
    // Folders that were not there are taken away again when something fails.
    let mut made = Vec::new();
    let outcome = write_all(folder, files, &mut made).map_err(|(path, error)| failed(&path, &error));
    if outcome.is_err() {
        for path in made.iter().rev() {
            let _ = fs::remove_dir(path);
        }
    }
    outcome
}

type Trouble = (std::path::PathBuf, std::io::Error);

fn write_all(folder: &Path, files: &[(String, Vec<u8>)], made: &mut Vec<std::path::PathBuf>) -> Result<(), Trouble> {
    let mut temporary = Vec::with_capacity(files.len());
    for (name, content) in files {
        let path = folder.join(name);
        let parent = path.parent().unwrap_or(folder).to_owned();
        make_folder(&parent, made)?;
        let written = || {
            let mut builder = tempfile::Builder::new();
            builder.prefix(".record-");
            #[cfg(unix)]
            {
                use std::os::unix::fs::PermissionsExt;
                builder.permissions(fs::Permissions::from_mode(0o644));
            }
            let mut file = builder.tempfile_in(&parent)?;
            file.write_all(content)?;
            file.flush()?;
            Ok(file)
        };
        temporary.push((path.clone(), written().map_err(|e| (path, e))?));
    }
    // A folder in the place of a file is the one thing that renaming would only find half-way.
    if let Some((path, _)) = temporary.iter().find(|(path, _)| path.is_dir()) {
        return Err((path.clone(), std::io::Error::from(std::io::ErrorKind::IsADirectory)));
    }
    for (path, file) in temporary {
        file.persist(&path).map_err(|e| (path, e.error))?;
    }
    Ok(())
}

fn make_folder(path: &Path, made: &mut Vec<std::path::PathBuf>) -> Result<(), Trouble> {
    if path.is_dir() || path.as_os_str().is_empty() {
        return Ok(());
    }
    if let Some(parent) = path.parent() {
        make_folder(parent, made)?;
    }
    fs::create_dir(path).map_err(|e| (path.to_owned(), e))?;
    made.push(path.to_owned());
    Ok(())
}
