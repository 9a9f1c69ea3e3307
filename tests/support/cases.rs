//! Reference cases (tests/data/cases.json) as sheets.

use serde_json::Value;

/// One reference case.
pub struct Case {
    pub id: String,
    pub sheet: String,
    /// The value as printed in the file, about 30 digits.
    pub value: String,
    /// Integral of |f|, where the file gives it.
    pub magnitude: Option<f64>,
}

/// All cases of the file.
pub fn cases() -> Vec<Case> {
    let text = include_str!("../data/cases.json");
    let file: Value = serde_json::from_str(text).expect("the data file is JSON");
    file["cases"].as_array().expect("a list of cases").iter().map(convert).collect()
}

fn text(case: &Value, key: &str) -> String {
    case[key].as_str().unwrap_or_else(|| panic!("{key} in {case}")).to_owned()
}

/// Parameters get the prefix `p_`, so that none clashes with a name of the language.
fn convert(case: &Value) -> Case {
    let parameters: Vec<String> = case["params"].as_object().expect("parameters").keys().cloned().collect();
    let own = |formula: &str| translate(formula, &parameters);
    let mut sheet = format!("# {}\n", text(case, "title"));
    for (name, value) in case["params"].as_object().expect("parameters") {
        sheet += &format!("p_{name} = {}\n", value.as_str().expect("exact numbers are strings"));
    }
    let range = |key: &str| {
        let ends = case[key].as_array().expect("an interval");
        format!("{key} in [{}, {}]", own(ends[0].as_str().unwrap()), own(ends[1].as_str().unwrap()))
    };
    let position = ["x", "y", "z"].map(|key| own(&text(case, key)));
    sheet += &format!(
        "s(u, v) = ({},\n  {},\n  {})\n  on {}, {}\n",
        position[0],
        position[1],
        position[2],
        range("u"),
        range("v")
    );
    if let Some(condition) = case.get("where").and_then(Value::as_str) {
        sheet += &format!("  where {}\n", own(condition));
    }
    let integrand = &case["integrand"];
    let question = if integrand.get("area").is_some() {
        "area(s)".to_owned()
    } else if let Some(f) = integrand.get("scalar") {
        format!("integral({}, s)", own(f.as_str().unwrap()))
    } else if let Some(field) = integrand.get("flux") {
        let components: Vec<String> = field.as_array().unwrap().iter().map(|f| own(f.as_str().unwrap())).collect();
        format!("flux(({}), s)", components.join(", "))
    } else if let Some(curvature) = integrand.get("curvature") {
        format!("integral({}, s)", curvature.as_str().unwrap())
    } else {
        moment(integrand["moment"].as_str().expect("a moment"))
    };
    sheet += &format!("answer = {question}\n");
    Case {
        id: text(case, "id"),
        sheet,
        value: text(case, "value"),
        magnitude: case.get("abs_integral").and_then(Value::as_str).map(|text| text.parse().unwrap()),
    }
}

fn moment(name: &str) -> String {
    let last = &name[name.len() - 1..];
    match name {
        "centroid_x" | "centroid_y" | "centroid_z" => format!("centroid(s).{last}"),
        "Ixx" | "Iyy" | "Izz" => format!("inertia(s, (0, 0, 0)).{}", &name[1..]),
        "Ixy" | "Ixz" | "Iyz" => format!("-inertia(s, (0, 0, 0)).{}", &name[1..]),
        "gyration2_x" | "gyration2_y" | "gyration2_z" => format!("inertia(s, (0, 0, 0)).{last}{last}/area(s)"),
        other => panic!("moment {other}"),
    }
}

/// Infix text of a case in the syntax of a sheet.
fn translate(formula: &str, parameters: &[String]) -> String {
    let mut out = String::new();
    let bytes = formula.as_bytes();
    let mut at = 0;
    while at < bytes.len() {
        let start = at;
        if bytes[at].is_ascii_alphabetic() {
            while at < bytes.len() && (bytes[at].is_ascii_alphanumeric() || bytes[at] == b'_') {
                at += 1;
            }
            let word = &formula[start..at];
            if parameters.iter().any(|parameter| parameter == word) {
                out += &format!("p_{word}");
            } else if word == "e" {
                out += "exp(1)";
            } else if let Some(order) = word.strip_prefix("besselj") {
                out += &format!("bessel_j({order}, ");
                at += 1;
            } else {
                out += word;
            }
        } else if bytes[at].is_ascii_digit() || bytes[at] == b'.' {
            while at < bytes.len()
                && (bytes[at].is_ascii_digit()
                    || bytes[at] == b'.'
                    || matches!(bytes[at], b'e' | b'E')
                    || (matches!(bytes[at], b'-' | b'+') && matches!(bytes[at - 1], b'e' | b'E')))
            {
                at += 1;
            }
            out += &formula[start..at];
        } else {
            out.push(bytes[at] as char);
            at += 1;
        }
    }
    out
}
