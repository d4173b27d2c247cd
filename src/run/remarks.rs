//! What a reader of a run's numbers should know, in a few sentences over all its snapshots.

use serde_json::Value;

use crate::run::parts::Part;

/// The remarks on a run.
pub fn remarks(parts: &[Part]) -> Vec<String> {
    let mut out = Vec::new();
    let Some(first) = parts.first() else { return out };
    let request = &first.what["request"];
    let families: Vec<&str> =
        parts.iter().flat_map(|p| list(&p.what["snapshot"]["families"])).filter_map(|f| f["definition"].as_str()).collect();
    // The level stands behind the sign; a peak fraction alone means peaks beyond 3 rms.
    let level = |f: &&str| f.split(['>', '<']).next_back().unwrap_or_default().split_whitespace().map(String::from).collect::<Vec<_>>();
    let by_rms = |f: &&str| level(f).iter().any(|w| w == "rms" || w == "run-rms") || level(f).get(1).is_some_and(|w| w == "peak");
    if families.iter().any(by_rms) {
        out.push("rms: root of the volume mean of the square in each snapshot; for vectors, of the squared magnitude".to_string());
    }
    for (family, rms) in request["run_rms"].as_object().into_iter().flatten() {
        out.push(format!("run-rms of family {family}: {}, every snapshot counting once", short(rms.as_f64().unwrap_or(f64::NAN))));
    }
    if families.iter().any(|f| f.ends_with(" peak")) {
        out.push("levels of objects grown from peaks are each object's own; the table shows the weakest possible".to_string());
    }
    let guide = range(parts, |s| s["mean_field"]["over_fluctuations"].as_f64());
    if let Some((low, high)) = guide {
        out.push(format!("|<b>|/b', mean over rms fluctuation of the magnetic field (b' of the vector's magnitude): {}", span(low, high)));
    }
    let scheme = request["derivative"].as_str().unwrap_or_default();
    for (key, name) in [("velocity", "velocity"), ("magnetic", "magnetic field")] {
        let there = parts.iter().any(|p| !p.what["snapshot"][key].is_null());
        match range(parts, |s| s[key]["gradient_variance_lost"].as_f64()) {
            Some((low, high)) => {
                let percent = |v: f64| 100.0 * v;
                out.push(format!(
                    "gradient variance of the {name} that {scheme} loses, from sampled lines: {} %",
                    span(percent(low), percent(high))
                ));
            }
            None if there => {
                out.push(format!("gradient variance of the {name} that {scheme} loses: not to be told without a periodic axis"))
            }
            None => {}
        }
    }
    out
}

fn list(v: &Value) -> impl Iterator<Item = &Value> {
    v.as_array().into_iter().flatten()
}

fn range(parts: &[Part], of: impl Fn(&Value) -> Option<f64>) -> Option<(f64, f64)> {
    parts.iter().filter_map(|p| of(&p.what["snapshot"])).fold(None, |range, v| match range {
        None => Some((v, v)),
        Some((low, high)) => Some((f64::min(low, v), f64::max(high, v))),
    })
}

/// Three significant digits; 0 for what round-off leaves.
fn short(v: f64) -> String {
    if v.abs() < 1e-10 {
        return "0".to_string();
    }
    let rounded: f64 = format!("{v:.2e}").parse().unwrap_or(v);
    if rounded == 0.0 || (1e-3..1e5).contains(&rounded.abs()) { format!("{rounded}") } else { format!("{rounded:e}") }
}

fn span(low: f64, high: f64) -> String {
    let (a, b) = (short(low), short(high));
    if a == b { a } else { format!("{a} to {b}") }
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn numbers_are_short() {
        assert_eq!(span(0.012_345, 0.012_349), "0.0123");
        assert_eq!(span(1e-9, 12.0), "1e-9 to 12");
        assert_eq!(span(1e-17, 0.5), "0 to 0.5");
    }
}
