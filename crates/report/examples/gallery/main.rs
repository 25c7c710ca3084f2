//! Writes charts, pictures and a page from invented data, to be looked at:
//! `cargo run -p spinledger-report --example gallery -- FOLDER`

mod invented;

use spinledger_report::{Drawing, Frame, Style};
use std::error::Error;
use std::path::Path;

fn main() -> Result<(), Box<dyn Error>> {
    let folder = std::env::args_os().nth(1).ok_or("say into which folder")?;
    let folder = Path::new(&folder);
    std::fs::create_dir_all(folder)?;
    let save = |name: &str, drawing: &Drawing| -> Result<(), Box<dyn Error>> {
        std::fs::write(folder.join(format!("{name}.svg")), drawing.svg())?;
        std::fs::write(folder.join(format!("{name}.png")), drawing.png(1.5)?)?;
        Ok(())
    };
    let charts = [
        ("crossing", invented::crossing(&[12, 16, 24, 32], 9, Style::Joined)),
        ("bands", invented::crossing(&[8, 12, 16, 24, 32, 48, 64, 96], 61, Style::Band)),
        ("dense", invented::crossing(&[8, 12, 16, 24, 32, 48, 64, 96], 500, Style::Points)),
        ("powers", invented::powers()),
    ];
    for (name, chart) in charts.into_iter().chain(invented::awkward()) {
        save(name, &chart.draw(Frame::WIDE))?;
        save(&format!("{name}-narrow"), &chart.draw(Frame::NARROW))?;
    }
    for (name, picture) in invented::pictures() {
        save(name, &picture.draw(520.0))?;
    }
    std::fs::write(folder.join("page.html"), invented::page().html())?;
    std::fs::write(folder.join("page-awkward.html"), invented::nasty().html())?;
    Ok(())
}
