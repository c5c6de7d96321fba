//! What makes daily work pleasant: starting sheets, shell help, tables for other programs, watching, stopping.

use assert_cmd::Command;
use std::fs;
use std::path::Path;
use std::process::{Child, Stdio};
use std::time::{Duration, Instant};

const KINDS: [&str; 7] = ["beam", "column", "fin", "pipe", "reactor", "shaft", "wall"];

fn run(arguments: &[&str]) -> (i32, String, String) {
    let output = Command::cargo_bin("spanwise").expect("built").args(arguments).output().expect("it runs");
    let text = |bytes: &[u8]| String::from_utf8(bytes.to_vec()).expect("UTF-8");
    (output.status.code().expect("not killed"), text(&output.stdout), text(&output.stderr))
}

#[test]
fn starting_sheets_solve_as_they_stand() {
    let folder = tempfile::tempdir().expect("a folder");
    for kind in KINDS {
        let file = folder.path().join(format!("{kind}.toml")).display().to_string();
        let (code, out, _) = run(&["new", kind, &file]);
        assert_eq!((code, out.as_str()), (0, ""));
        let (code, out, err) = run(&["solve", &file]);
        assert_eq!((code, err.as_str()), (0, ""), "{kind}: {out}");
        let text = fs::read_to_string(&file).expect("written");
        assert!(text.matches(" # ").count() >= 5, "{kind} is commented");
        assert_eq!(run(&["new", kind]).1, text);
        // A file that is there is left alone.
        let (code, _, err) = run(&["new", kind, &file]);
        assert!(code == 2 && err.contains("choose another name"), "{err}");
    }
    assert_eq!(run(&["new", "bridge"]).0, 2);
}

#[test]
fn completions_and_manual_name_every_task() {
    let tasks = ["solve", "check", "recheck", "compare", "new", "schema"];
    for shell in ["bash", "zsh", "fish", "powershell", "elvish"] {
        let (code, out, _) = run(&["completions", shell]);
        assert!(code == 0 && tasks.iter().all(|task| out.contains(task)), "{shell}");
    }
    let (code, out, _) = run(&["manual"]);
    assert!(code == 0 && out.contains(".TH spanwise"));
    assert!(tasks.iter().all(|task| out.contains(&task.to_uppercase())) && out.contains("time\\-limit"), "{out}");
}

/// Fields and rows of a NumPy file.
fn npy(bytes: &[u8]) -> (String, Vec<f64>) {
    assert_eq!(&bytes[..8], b"\x93NUMPY\x03\x00");
    let length = u32::from_le_bytes(bytes[8..12].try_into().expect("four bytes")) as usize;
    assert_eq!((12 + length) % 64, 0, "aligned");
    let header = String::from_utf8(bytes[12..12 + length].to_vec()).expect("UTF-8");
    let rest = bytes[12 + length..].chunks_exact(8);
    assert!(rest.remainder().is_empty());
    (header, rest.map(|b| f64::from_le_bytes(b.try_into().expect("eight bytes"))).collect())
}

#[test]
fn tables_are_read_by_other_programs_to_the_last_digit() {
    let folder = tempfile::tempdir().expect("a folder");
    let record = folder.path().join("record").display().to_string();
    assert_eq!(run(&["solve", "examples/sheets/agitator-shaft.toml", "--record", &record]).0, 0);
    let csv = fs::read_to_string(Path::new(&record).join("solution.csv")).expect("there");
    let mut lines = csv.lines();
    let head: Vec<&str> = lines.next().expect("a header").split(',').collect();
    assert_eq!(head[0], "x [m]");
    let rows: Vec<Vec<f64>> =
        lines.map(|line| line.split(',').map(|cell| cell.parse().expect("a number")).collect()).collect();
    let (header, values) = npy(&fs::read(Path::new(&record).join("solution.npy")).expect("there"));
    for name in &head {
        assert!(header.contains(&format!("('{name}', '<f8')")), "{header}");
    }
    assert!(header.contains(&format!("'shape': ({},)", rows.len())) && header.ends_with('\n'));
    // Both hold the same numbers, bit for bit.
    assert_eq!(rows.concat(), values);
    // And both are read without arguments, where these programs are installed.
    let script = r"
import numpy
a = numpy.load('solution.npy')
print(len(a), a.dtype.names[0], repr(float(a['x [m]'][-1])))
try:
    import pandas
    t = pandas.read_csv('solution.csv')
    assert list(t.columns) == list(a.dtype.names)
    assert (t['x [m]'].to_numpy() == a['x [m]']).all()
except ImportError:
    pass
";
    let python = std::process::Command::new("python3").args(["-c", script]).current_dir(&record).output();
    if let Ok(output) = python
        && !String::from_utf8_lossy(&output.stderr).contains("No module named 'numpy'")
    {
        let shown = String::from_utf8_lossy(&output.stdout);
        assert!(output.status.success(), "{}", String::from_utf8_lossy(&output.stderr));
        assert_eq!(shown.trim(), format!("{} x [m] {:?}", rows.len(), rows[rows.len() - 1][0]));
    }
}

/// A sheet that takes many seconds.
fn long() -> String {
    let pieces: String = (0..3000).map(|k| format!("\"{k} mm .. {} mm\" = \"{} kN/m\", ", k + 1, k % 7 + 1)).collect();
    format!(
        "[given]\nB = \"10 kN m^2\"\nq = {{ {pieces} }}\n[span]\nx = [\"0 mm\", \"3000 mm\"]\n[unknowns]\ny = \"mm\"\nz = \"mm\"\n\
         [equations]\na = \"(B*y'')'' + 1e3 kN/m^2*(y - z) = q\"\nb = \"(B*z'')'' + 1e3 kN/m^2*(z - y) = q*sin(x*300 1/m)\"\n\
         [conditions]\nc = [\"y(0 m) = 0\", \"y'(0 m) = 0\", \"y(3 m) = 0\", \"y'(3 m) = 0\"]\n\
         d = [\"z(0 m) = 0\", \"z'(0 m) = 0\", \"z(3 m) = 0\", \"z'(3 m) = 0\"]\n[report]\nm = \"max(y) in mm\"\n"
    )
}

#[test]
fn the_time_limit_holds() {
    let folder = tempfile::tempdir().expect("a folder");
    let sheet = folder.path().join("long.toml");
    fs::write(&sheet, long()).expect("written");
    let record = folder.path().join("record");
    let start = Instant::now();
    let (sheet, at) = (sheet.display().to_string(), record.display().to_string());
    let (code, out, err) = run(&["solve", &sheet, "--record", &at, "--time-limit", "0.2"]);
    assert!(start.elapsed() < Duration::from_secs(5), "{:?}", start.elapsed());
    assert_eq!((code, out.as_str()), (1, ""));
    assert!(err.contains("not solved within the 0.2 s allowed"), "{err}");
    assert!(!record.exists());
    assert_eq!(run(&["solve", &sheet, "--time-limit", "-1"]).0, 2);
}

#[cfg(unix)]
fn start(arguments: &[&str]) -> Child {
    let program = assert_cmd::cargo::cargo_bin("spanwise");
    let mut command = std::process::Command::new(program);
    command.args(arguments).stdout(Stdio::null()).stderr(Stdio::null()).spawn().expect("it runs")
}

#[cfg(unix)]
fn interrupt(child: &mut Child) -> (Duration, Option<i32>) {
    let sent = Instant::now();
    let killed = std::process::Command::new("kill").args(["-INT", &child.id().to_string()]).status();
    assert!(killed.expect("kill runs").success());
    let status = child.wait().expect("it ends");
    (sent.elapsed(), status.code())
}

#[cfg(unix)]
#[test]
fn ctrl_c_ends_at_once_and_leaves_nothing() {
    let folder = tempfile::tempdir().expect("a folder");
    let sheet = folder.path().join("long.toml");
    fs::write(&sheet, long()).expect("written");
    let record = folder.path().join("record");
    let mut fastest = Duration::MAX;
    for attempt in 0..5 {
        let mut child = start(&["solve", &sheet.display().to_string(), "--record", &record.display().to_string()]);
        std::thread::sleep(Duration::from_millis(250 + 60 * attempt));
        let (took, code) = interrupt(&mut child);
        assert_eq!(code, Some(1));
        assert!(!record.exists(), "nothing half-written");
        fastest = fastest.min(took);
        if fastest < Duration::from_millis(100) {
            break;
        }
    }
    // A busy machine may delay one attempt, not all of them.
    assert!(fastest < Duration::from_millis(100), "{fastest:?}");
}

#[cfg(unix)]
#[test]
fn a_watched_sheet_is_solved_again_when_it_changes() {
    let folder = tempfile::tempdir().expect("a folder");
    let sheet = folder.path().join("wall.toml");
    let (_, text, _) = run(&["new", "wall"]);
    fs::write(&sheet, &text).expect("written");
    let record = folder.path().join("record");
    let result = record.join("record.json");
    let mut child =
        start(&["solve", &sheet.display().to_string(), "--watch", "--record", &record.display().to_string()]);
    let wait = |what: &dyn Fn(&str) -> bool| {
        let start = Instant::now();
        loop {
            if fs::read_to_string(&result).is_ok_and(|text| what(&text)) {
                return;
            }
            assert!(start.elapsed() < Duration::from_secs(30), "not solved again");
            std::thread::sleep(Duration::from_millis(20));
        }
    };
    wait(&|text| text.contains("Wall of two layers"));
    // A slip is reported and watching goes on.
    fs::write(&sheet, text.replace("q' = 0", "q' = qq")).expect("written");
    std::thread::sleep(Duration::from_millis(400));
    fs::write(&sheet, text.replace("Wall of two layers", "Wall after the change")).expect("written");
    wait(&|text| text.contains("Wall after the change"));
    std::thread::sleep(Duration::from_millis(300));
    let (took, code) = interrupt(&mut child);
    assert_eq!(code, Some(0));
    assert!(took < Duration::from_secs(1), "{took:?}");
}
