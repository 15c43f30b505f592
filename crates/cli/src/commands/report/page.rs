//! The page: text, tables, style.

use super::data::Run;
use serde_json::Value;

/// Style of the page, for the screen and for paper.
pub const STYLE: &str = "body{font:15px/1.45 system-ui,sans-serif;max-width:1360px;margin:1.5em auto;padding:0 1em;color:#111}\
h1,h2,h3{line-height:1.2;overflow-wrap:anywhere}figure{margin:0;break-inside:avoid}figure>svg{display:block;width:100%;height:auto}\
.plots{display:grid;grid-template-columns:repeat(auto-fill,minmax(min(100%,400px),1fr));gap:1.4em 1.8em}\
.shapes{display:grid;grid-template-columns:repeat(6,1fr);gap:.6em;max-width:1260px}\
figcaption{font-weight:600}.shape figcaption{font-weight:400;text-align:center}\
svg text{font:12px system-ui,sans-serif;fill:#222}.grid{stroke:#ddd;stroke-width:1}\
.box{fill:none;stroke:#444}.line{fill:none;stroke-width:1.6}.shape path{stroke-width:.5;stroke-linejoin:round}\
.legend{font-size:13px}.legend svg{vertical-align:middle}.legend span{margin-right:1.2em;display:inline-block}\
.wide{overflow-x:auto}table{border-collapse:collapse;font-size:14px}\
td,th{border:1px solid #bbb;padding:.2em .6em;text-align:left;vertical-align:top}\
pre{background:#f5f5f5;padding:.8em;overflow-x:auto;white-space:pre-wrap;font-size:13px}.small{font-size:13px;color:#444}\
.warning{background:#fff3cd;padding:.4em .8em}\
@media(max-width:700px){.shapes{grid-template-columns:repeat(2,1fr)}.wide{font-size:12px}}\
@media print{body{max-width:none;margin:0;font-size:13px}.plots{grid-template-columns:1fr 1fr}\
.shapes{grid-template-columns:repeat(3,1fr);break-inside:avoid}h2,h3{break-after:avoid}\
details::details-content{content-visibility:visible;height:auto}pre{font-size:10px}}";

/// Text that is safe within a page.
pub fn escape(text: &str) -> String {
    let mut safe = String::with_capacity(text.len());
    for letter in text.chars() {
        match letter {
            '&' => safe += "&amp;",
            '<' => safe += "&lt;",
            '>' => safe += "&gt;",
            '"' => safe += "&quot;",
            // Not allowed in a page, and of no use in one.
            letter if letter.is_control() && letter != '\n' && letter != '\t' => {}
            letter => safe.push(letter),
        }
    }
    safe
}

/// A number for an axis or a caption.
pub fn number(value: f64) -> String {
    let size = value.abs();
    if value == 0.0 {
        return "0".into();
    }
    if (1e-3..1e5).contains(&size) {
        let digits = (3 - size.log10().floor() as i32).clamp(0, 6) as usize;
        let text = format!("{value:.digits$}");
        return if text.contains('.') { text.trim_end_matches('0').trim_end_matches('.').to_owned() } else { text };
    }
    let text = format!("{value:.3e}");
    match text.split_once('e') {
        Some((digits, power)) if digits.contains('.') => {
            format!("{}e{power}", digits.trim_end_matches('0').trim_end_matches('.'))
        }
        _ => text,
    }
}

/// What is said of each run, runs side by side.
pub fn overview(runs: &[Run]) -> String {
    const ROWS: [(&str, &str); 15] = [
        ("title", "/title"),
        ("why it ended", "/stopped"),
        ("simulated time [s]", "/end/time_s"),
        ("free energy at the end [J]", "/end/free_energy_J"),
        ("energy balance error", "/end/energy_balance_error"),
        ("steps", "/steps/accepted"),
        ("refused steps", "/steps/refused"),
        ("refused for", "/steps/refused_for"),
        ("steps bounded by", "/steps/bounded_by"),
        ("vertices at the end", "/end/vertex_count"),
        ("wall time [s]", "/timings/total_s"),
        ("version", "/provenance/version"),
        ("seed", "/provenance/seed"),
        ("threads", "/provenance/threads"),
        ("started", "/provenance/started"),
    ];
    let heads: String = runs.iter().map(|run| format!("<th>{}</th>", escape(&run.name))).collect();
    let rows: String = ROWS
        .iter()
        .map(|(name, pointer)| {
            let cells: String = runs.iter().map(|run| format!("<td>{}</td>", cell(run, pointer))).collect();
            format!("<tr><th>{name}</th>{cells}</tr>\n")
        })
        .collect();
    format!("<div class=\"wide\"><table><tr><th>run</th>{heads}</tr>\n{rows}</table></div>\n")
}

fn cell(run: &Run, pointer: &str) -> String {
    if run.summary.is_null() && pointer == "/stopped" {
        return "no summary: the run goes on, or was cut off".into();
    }
    match run.summary.pointer(pointer) {
        Some(Value::Object(inner)) if inner.is_empty() => "–".into(),
        Some(Value::Object(inner)) => {
            let lines: Vec<String> = inner.iter().map(|(key, value)| format!("{}: {value}", escape(key))).collect();
            lines.join("<br/>")
        }
        Some(Value::Number(value)) => match (value.as_u64(), value.as_f64()) {
            (Some(whole), _) => whole.to_string(),
            (None, Some(value)) => number(value),
            _ => value.to_string(),
        },
        _ => escape(&run.told(pointer)),
    }
}

/// Warnings of a run.
pub fn warnings(run: &Run) -> String {
    let list = run.summary.get("warnings").and_then(Value::as_array);
    match list.filter(|list| !list.is_empty()) {
        None => "<p>No warnings.</p>\n".into(),
        Some(list) => list
            .iter()
            .map(|warning| format!("<p class=\"warning\">{}</p>\n", escape(warning.as_str().unwrap_or_default())))
            .collect(),
    }
}
