//! A folder of results is complete or absent: it is written aside, in the folder that will hold it, and moved into
//! place when every byte has reached the disk. What neap did not write is never deleted.

use std::fs::{self, File};
use std::io;
use std::path::{Path, PathBuf};

use tempfile::TempDir;

use super::provenance::RUN_JSON;
use super::schema::TABLES;
use crate::diagnostic::Fault;

/// Whether results can be written to `dir`; to be asked before a long run starts, and asked again when it ends.
///
/// With `replace`, a folder that is empty or holds nothing but an earlier run's files may be replaced.
///
/// # Errors
/// [`Fault::Refused`] where something stands there that may not be replaced; [`Fault::Io`] where that cannot be found out.
pub fn check_destination(dir: &Path, replace: bool) -> Result<(), Fault> {
    let shown = dir.display();
    if dir.file_name().is_none() {
        return Err(Fault::Refused {
            message: format!("`{shown}` does not name a folder of its own"),
            help: "name the folder to make, as in `--out results`".to_owned(),
        });
    }
    let found = match fs::symlink_metadata(dir) {
        Ok(found) => found,
        Err(cause) if cause.kind() == io::ErrorKind::NotFound => return Ok(()),
        Err(cause) => return Err(Fault::Io { doing: "look at".to_owned(), path: dir.to_owned(), cause }),
    };
    if !found.is_dir() {
        return Err(Fault::Refused {
            message: format!("`{shown}` exists and is not a folder"),
            help: "choose another folder with `--out`".to_owned(),
        });
    }
    if !replace {
        return Err(Fault::Refused {
            message: format!("the folder `{shown}` exists already"),
            help: "choose another with `--out`, or replace an earlier run's results with `--replace`".to_owned(),
        });
    }
    match foreign(dir).map_err(|cause| Fault::Io { doing: "look into".to_owned(), path: dir.to_owned(), cause })? {
        None => Ok(()),
        Some(what) => Err(Fault::Refused {
            message: format!("the folder `{shown}` is not replaced: {what}"),
            help: "choose another folder with `--out`, or move those files away".to_owned(),
        }),
    }
}

/// What in `dir` is not from an earlier run, in words; `None` where it is empty or all of it is.
fn foreign(dir: &Path) -> io::Result<Option<String>> {
    let mut names =
        fs::read_dir(dir)?.map(|entry| entry.map(|entry| entry.file_name())).collect::<Result<Vec<_>, _>>()?;
    names.sort();
    if names.is_empty() {
        return Ok(None);
    }
    let ours = |name: &std::ffi::OsString| name == RUN_JSON || TABLES.iter().any(|table| name == table.file);
    if let Some(name) = names.iter().find(|name| !ours(name)) {
        return Ok(Some(format!("it holds `{}`, which is not one of the tables", name.to_string_lossy())));
    }
    let run = names.iter().any(|name| name == RUN_JSON)
        && serde_json::from_slice::<serde_json::Value>(&fs::read(dir.join(RUN_JSON))?)
            .is_ok_and(|run| run.get("neap").is_some());
    Ok((!run).then(|| format!("it has no `{RUN_JSON}` of an earlier run")))
}

/// A folder in the making. Dropped before [`Folder::finish`], it leaves nothing behind.
pub(super) struct Folder {
    destination: PathBuf,
    parent: PathBuf,
    replace: bool,
    aside: Option<TempDir>,
    /// Parents that had to be made, outermost first.
    made: Vec<PathBuf>,
}

impl Folder {
    /// Makes the folder aside, and its parents where they are missing.
    pub(super) fn begin(destination: &Path, replace: bool) -> Result<Self, Fault> {
        check_destination(destination, replace)?;
        let parent = match destination.parent() {
            Some(parent) if !parent.as_os_str().is_empty() => parent.to_owned(),
            _ => PathBuf::from("."),
        };
        let mut folder = Self {
            destination: destination.to_owned(),
            parent: parent.clone(),
            replace,
            aside: None,
            made: Vec::new(),
        };
        let missing: Vec<&Path> = parent.ancestors().take_while(|p| !p.as_os_str().is_empty() && !p.exists()).collect();
        for path in missing.into_iter().rev() {
            fs::create_dir(path).map_err(|cause| io_fault("make the folder", path, cause))?;
            folder.made.push(path.to_owned());
        }
        let aside = temporary(&parent, "unfinished").map_err(|cause| io_fault("write into", &parent, cause))?;
        folder.aside = Some(aside);
        Ok(folder)
    }

    /// Where to write `file` for now.
    pub(super) fn aside(&self, file: &str) -> PathBuf {
        self.aside.as_ref().map_or_else(|| self.parent.join(file), |aside| aside.path().join(file))
    }

    /// Where `file` will stand, for messages.
    pub(super) fn shown(&self, file: &str) -> PathBuf {
        self.destination.join(file)
    }

    /// Makes `file` with what `fill` writes and waits until it is on the disk.
    pub(super) fn file<T>(&self, file: &str, fill: impl FnOnce(&mut File) -> Result<T, Fault>) -> Result<T, Fault> {
        let failed = |cause| io_fault("write", &self.shown(file), cause);
        let mut open = File::create_new(self.aside(file)).map_err(failed)?;
        let made = fill(&mut open)?;
        open.sync_all().map_err(failed)?;
        Ok(made)
    }

    /// Moves the folder into place.
    pub(super) fn finish(mut self) -> Result<(), Fault> {
        check_destination(&self.destination, self.replace)?;
        let Some(aside) = self.aside.take() else { return Ok(()) };
        let failed = |cause| io_fault("move the results to", &self.destination, cause);
        sync_folder(aside.path()).map_err(failed)?;
        // The old results are kept until the new ones stand in their place.
        let mut old = None;
        if self.replace && self.destination.exists() {
            let holder = temporary(&self.parent, "replaced").map_err(failed)?;
            fs::rename(&self.destination, holder.path().join("old")).map_err(failed)?;
            old = Some(holder);
        }
        if let Err(cause) = fs::rename(aside.path(), &self.destination) {
            if let Some(holder) = old
                && fs::rename(holder.path().join("old"), &self.destination).is_err()
            {
                let _ = holder.keep(); // better a stray folder than lost results
            }
            return Err(failed(cause));
        }
        let _ = aside.keep(); // it has moved: nothing is left to remove
        self.made.clear();
        sync_folder(&self.parent).map_err(failed)
    }
}

impl Drop for Folder {
    fn drop(&mut self) {
        drop(self.aside.take());
        for path in self.made.iter().rev() {
            let _ = fs::remove_dir(path); // only while empty
        }
    }
}

fn io_fault(doing: &str, path: &Path, cause: io::Error) -> Fault {
    Fault::Io { doing: doing.to_owned(), path: path.to_owned(), cause }
}

/// A hidden folder inside `parent` with the permissions that any new folder has.
fn temporary(parent: &Path, what: &str) -> io::Result<TempDir> {
    let prefix = format!(".neap-{what}-");
    let mut builder = tempfile::Builder::new();
    builder.prefix(&prefix);
    #[cfg(unix)]
    {
        use std::os::unix::fs::PermissionsExt;
        builder.permissions(fs::Permissions::from_mode(0o777)); // less the umask; tempfile's own default shuts colleagues out
    }
    builder.tempdir_in(parent).map_err(|error| {
        // Without the name that was tried, which nobody has heard of.
        let text = error.to_string();
        io::Error::new(error.kind(), text.split(" at path ").next().unwrap_or_default())
    })
}

/// Waits until the names in a folder are on the disk; elsewhere than on Unix a folder cannot be opened for it.
fn sync_folder(path: &Path) -> io::Result<()> {
    if cfg!(unix) { File::open(path)?.sync_all() } else { Ok(()) }
}

#[cfg(test)]
mod tests {
    use std::io::Write;

    use super::*;

    fn put(dir: &Path, name: &str, text: &str) {
        fs::write(dir.join(name), text).unwrap();
    }

    fn fill(folder: &Folder, text: &str) {
        folder
            .file(RUN_JSON, |file| {
                file.write_all(text.as_bytes()).unwrap();
                Ok(())
            })
            .unwrap();
    }

    fn names(dir: &Path) -> Vec<String> {
        let mut names: Vec<String> =
            fs::read_dir(dir).unwrap().map(|entry| entry.unwrap().file_name().into_string().unwrap()).collect();
        names.sort();
        names
    }

    #[test]
    fn appears_whole_and_makes_its_parents() {
        let place = tempfile::tempdir().unwrap();
        let out = place.path().join("a/b/results");
        let folder = Folder::begin(&out, false).unwrap();
        fill(&folder, "{\"neap\": 1}");
        assert!(!out.exists());
        folder.finish().unwrap();
        assert_eq!(names(&out), [RUN_JSON]);
        assert_eq!(names(&place.path().join("a/b")), ["results"]);
    }

    #[cfg(unix)]
    #[test]
    fn can_be_read_by_whoever_may_read_new_folders() {
        use std::os::unix::fs::PermissionsExt;
        let place = tempfile::tempdir().unwrap();
        let plain = place.path().join("plain");
        fs::create_dir(&plain).unwrap();
        let out = place.path().join("results");
        Folder::begin(&out, false).unwrap().finish().unwrap();
        let mode = |path: &Path| fs::metadata(path).unwrap().permissions().mode();
        assert_eq!(mode(&out), mode(&plain));
    }

    #[test]
    fn leaves_nothing_when_dropped() {
        let place = tempfile::tempdir().unwrap();
        let folder = Folder::begin(&place.path().join("a/b/results"), false).unwrap();
        fill(&folder, "half");
        drop(folder);
        assert!(names(place.path()).is_empty());
    }

    #[test]
    fn refuses_what_exists_and_names_the_way_out() {
        let place = tempfile::tempdir().unwrap();
        match check_destination(place.path(), false) {
            Err(Fault::Refused { help, .. }) => assert!(help.contains("--replace")),
            other => panic!("{other:?}"),
        }
        put(place.path(), "file", "");
        assert!(matches!(check_destination(&place.path().join("file"), true), Err(Fault::Refused { .. })));
        assert!(matches!(check_destination(Path::new(".."), true), Err(Fault::Refused { .. })));
    }

    #[test]
    fn replaces_an_earlier_run_and_nothing_else() {
        let place = tempfile::tempdir().unwrap();
        let out = place.path().join("results");
        let run = |text: &str| {
            let folder = Folder::begin(&out, true)?;
            fill(&folder, text);
            folder.finish()
        };
        run("{\"neap\": \"first\"}").unwrap();
        run("{\"neap\": \"second\"}").unwrap();
        assert_eq!(fs::read_to_string(out.join(RUN_JSON)).unwrap(), "{\"neap\": \"second\"}");
        assert_eq!(names(place.path()), ["results"]);

        put(&out, "my analysis.R", "");
        match run("{\"neap\": \"third\"}") {
            Err(Fault::Refused { message, .. }) => assert!(message.contains("my analysis.R")),
            other => panic!("{other:?}"),
        }
        assert_eq!(names(&out), ["my analysis.R", RUN_JSON]);
    }

    #[test]
    fn a_folder_of_someone_else_stays() {
        let place = tempfile::tempdir().unwrap();
        let out = place.path().join("results");
        fs::create_dir(&out).unwrap();
        check_destination(&out, true).expect("an empty folder may be replaced");
        put(&out, RUN_JSON, "{\"name\": \"a package\"}");
        assert!(matches!(check_destination(&out, true), Err(Fault::Refused { .. })));
    }

    #[test]
    fn a_place_that_cannot_be_written_is_an_io_fault_that_names_it() {
        let place = tempfile::tempdir().unwrap();
        put(place.path(), "file", "");
        match Folder::begin(&place.path().join("file/results"), false).err() {
            Some(Fault::Io { path, .. }) => assert!(path.starts_with(place.path())),
            other => panic!("{other:?}"),
        }
        let cause = temporary(&place.path().join("absent"), "unfinished").unwrap_err().to_string();
        assert!(!cause.contains("unfinished") && !cause.is_empty(), "{cause}");
        #[cfg(target_os = "linux")]
        assert!(matches!(Folder::begin(Path::new("/proc/results"), false).err(), Some(Fault::Io { .. })));
        assert_eq!(names(place.path()), ["file"]);
    }
}
