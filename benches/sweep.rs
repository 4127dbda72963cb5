//! What one point of a sweep costs, for every report: a setting is changed, the report is made, its lines are written.

use std::hint::black_box;
use std::sync::atomic::AtomicBool;
use std::time::Duration;

use criterion::{Criterion, criterion_group, criterion_main};
use twincone::job::Document;
use twincone::job::plan::Report;
use twincone::material::Catalogue;
use twincone::sweep::Sweep;

/// Crossed cones of a 405 nm pump behind filters, over the tilt.
const JOB: &str = r#"
[pump]
wavelength = "405 nm"
[crystal]
material = "bbo"
dataset = "kato-1986"
cut = { theta = "42.541 deg", phi = "0 deg" }
length = "2 mm"
[[filter]]
width = "3 nm"
[sweep]
axes = [ { key = "crystal.tilt", from = "0 deg", to = "1 deg", points = 1001 } ]
"#;

fn points(c: &mut Criterion) {
    let catalogue = Catalogue::default();
    for (name, report) in Report::ALL {
        let mut document = Document::from_file("job", JOB);
        document.set("report", "sweep.report", name);
        if report == Report::Tilt {
            // what report tilt finds cannot be an axis of it
            document.set("target", "sweep.target.crossing", "3 deg");
            let axis = "[{ key = \"crystal.cut.theta\", from = \"42 deg\", to = \"43 deg\", points = 1001 }]";
            document.set_raw("axes", "sweep.axes", axis);
        }
        let sweep = Sweep::new(&document, &catalogue).unwrap_or_else(|why| panic!("{why}"));
        let mut worker = sweep.worker();
        let never = AtomicBool::new(false);
        let mut point = 0;
        c.bench_function(&format!("one point of report {name}"), |b| {
            b.iter(|| {
                point = (point + 1) % sweep.count();
                black_box(worker.piece(point..point + 1, Vec::new(), &never))
            });
        });
    }
}

fn short() -> Criterion {
    Criterion::default()
        .warm_up_time(Duration::from_millis(300))
        .measurement_time(Duration::from_millis(1500))
        .sample_size(10)
        .nresamples(5000)
        .without_plots()
}

criterion_group! { name = all; config = short(); targets = points }
criterion_main!(all);
