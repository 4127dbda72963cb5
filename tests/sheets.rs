//! Pictures and sheets in a browser: at desktop and phone width and on paper nothing overflows, no two texts of a drawing
//! overlap, and the console stays silent. Skipped, with a message, where Chromium is not installed.

use std::path::{Path, PathBuf};
use std::process::{Command, Output};

const JOBS: [&str; 5] = [
    "examples/crossed-cones.toml --tilt 0.3deg --waist 100um --power 40mW --filter-width 3nm --iris 0.2deg",
    "examples/collinear-cut-tilted.toml --roll 90deg",
    "examples/two-colours.toml",
    "examples/two-crystals.toml",
    "examples/biaxial.toml --cross-tilt 0.5deg --temperature 22degC",
];

const PLATE: &str = " --set compensator.length=1mm --set compensator.roll=90deg";

fn chromium() -> Option<PathBuf> {
    let paths = std::env::var_os("PATH")?;
    let names = ["chromium", "chromium-browser", "google-chrome"];
    let found = std::env::split_paths(&paths).flat_map(|p| names.map(|n| p.join(n))).find(|p| p.is_file());
    if found.is_none() {
        eprintln!("skipped: no Chromium on the path");
    }
    found
}

fn twincone(line: &str, output: &Path) {
    let status = Command::new(env!("CARGO_BIN_EXE_twincone"))
        .args(line.split(' '))
        .arg("--quiet")
        .arg("--output")
        .arg(output)
        .status()
        .expect("the program starts");
    assert!(status.success(), "twincone {line}");
}

fn browse(browser: &Path, folder: &Path, arguments: &[&str]) -> Output {
    let output = Command::new(browser)
        .args(["--headless", "--no-sandbox", "--disable-gpu", "--enable-logging=stderr"])
        .arg(format!("--user-data-dir={}", folder.join("profile").display()))
        .args(arguments)
        .output()
        .expect("Chromium starts");
    let said = String::from_utf8_lossy(&output.stderr);
    assert!(!said.contains("CONSOLE"), "{said}");
    output
}

/// A page that holds another in a frame of the given width and reports how wide it is and which texts overlap.
fn wrapped(html: &str, width: u32) -> String {
    let inner = html.replace('&', "&amp;").replace('"', "&quot;");
    format!(
        "<!DOCTYPE html><meta charset=utf-8><link rel=icon href=\"data:,\"><iframe id=f width={width} height=900 \
         srcdoc=\"{inner}\"></iframe><pre id=report></pre><script>\n\
         onload = () => {{\n\
           const d = f.contentDocument, e0 = d.documentElement,\n\
             out = [e0.scrollWidth > e0.clientWidth ? 'too wide: ' + e0.scrollWidth : 'fits'];\n\
           for (const e of d.querySelectorAll('body *')) {{\n\
             if (e.closest('svg') && (e.tagName !== 'svg' || e.closest('figure'))) continue;\n\
             const r = e.getBoundingClientRect();\n\
             if (r.right > {width} + 0.5) out.push('beyond ' + e.tagName + ' ' + e.textContent.slice(0, 40));\n\
           }}\n\
           for (const s of d.querySelectorAll('svg')) {{\n\
             const t = [...s.querySelectorAll('text')].map(e => [e.textContent, e.getBoundingClientRect()]);\n\
             const b = s.getBoundingClientRect();\n\
             t.forEach(([a, p], i) => {{\n\
               if (p.left < b.left - 1 || p.right > b.right + 1 || p.top < b.top - 1 || p.bottom > b.bottom + 1) out.push('outside ' + a);\n\
               t.slice(0, i).forEach(([c, q]) => {{\n\
                 const w = Math.min(p.right, q.right) - Math.max(p.left, q.left);\n\
                 const h = Math.min(p.bottom, q.bottom) - Math.max(p.top, q.top);\n\
                 if (w > 1 && h > 0.25 * p.height) out.push('overlap ' + a + ' | ' + c);\n\
               }});\n\
             }});\n\
           }}\n\
           report.textContent = 'REPORT\\n' + out.join('\\n') + '\\nEND';\n\
         }};</script>"
    )
}

/// The page fits a width (a narrow one moves its figures sideways within themselves), and no texts overlap.
fn assert_fits(browser: &Path, folder: &Path, name: &str, html: &str, width: u32) {
    let page = folder.join("wrapped.html");
    std::fs::write(&page, wrapped(html, width)).expect("a page");
    let url = format!("file://{}", page.display());
    let output = browse(
        browser,
        folder,
        &["--virtual-time-budget=4000", "--dump-dom", "--window-size=1400,1000", &url],
    );
    let dom = String::from_utf8_lossy(&output.stdout);
    let report = dom.split("REPORT\n").nth(1).and_then(|r| r.split("\nEND").next()).unwrap_or("no report");
    assert!(report == "fits", "{name} at {width}: {report}");
}

#[test]
fn sheets_fit_screen_and_paper() {
    let Some(browser) = chromium() else { return };
    let folder = tempfile::tempdir().expect("a folder");
    for job in JOBS {
        for kind in ["order", "bench"] {
            let page = folder.path().join("sheet.html");
            let name = format!("sheet --kind {kind} --job {job}");
            twincone(&name, &page);
            let html = std::fs::read_to_string(&page).expect("a page");
            // the one address is the name of the SVG language, which nobody fetches
            assert!(
                !html.replace("http://www.w3.org/2000/svg", "").contains("http"),
                "{name} asks the network"
            );
            for width in [375, 1280] {
                assert_fits(&browser, folder.path(), &name, &html, width);
            }
            let pdf = folder.path().join("sheet.pdf");
            let print = format!("--print-to-pdf={}", pdf.display());
            browse(&browser, folder.path(), &[&print, &format!("file://{}", page.display())]);
            let bytes = std::fs::read(&pdf).expect("a PDF");
            assert!(bytes.starts_with(b"%PDF") && bytes.len() > 10_000, "{name}");
        }
    }
}

#[test]
fn texts_of_drawings_do_not_overlap() {
    let Some(browser) = chromium() else { return };
    let folder = tempfile::tempdir().expect("a folder");
    for job in JOBS {
        for view in ["camera", "side", "front", "ring-sweep", "cut", "phase"] {
            // one crystal alone has a curve of cuts, and rings that do not cross have no pair
            let none = [("cut", "two-crystals"), ("phase", "collinear-cut-tilted"), ("phase", "biaxial")];
            if none.iter().any(|(of, name)| *of == view && job.contains(name)) {
                continue;
            }
            let drawing = folder.path().join("drawing.svg");
            let plate = if view == "phase" && job.contains("crossed-cones") { PLATE } else { "" };
            let name = format!("picture --view {view} --job {job}{plate}");
            twincone(&name, &drawing);
            let svg = std::fs::read_to_string(&drawing).expect("a drawing");
            let html = format!(
                "<!DOCTYPE html><style>body {{ margin: 0 }} svg {{ max-width: 100%; height: auto }}</style>{svg}"
            );
            assert_fits(&browser, folder.path(), &name, &html, 1000);
        }
    }
}
