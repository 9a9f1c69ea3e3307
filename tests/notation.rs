//! Formulas in LaTeX, Typst and MathML, held to readers of these notations that are not ours: the crate `pulldown-latex`
//! and `pdflatex`, the compiler of Typst (its Python package), an XML reader with the element list of MathML Core
//! (W3C, MathML Core, section 2.1). What they look like stands in the snapshots.

use proptest::prelude::*;
use quadrel::expression::{BinaryFunction, ExpressionId, Function, Graph, SymbolId, evaluate_one};
use quadrel::language::{Source, check};
use quadrel::report::notation::{Document, Equation, latex, mathml, typst};
use quadrel::simplify::{Form, NameKind};
use std::path::{Path, PathBuf};
use std::process::Command;

/// Formulas as a sheet writes them, with what they show.
const FORMULAS: &[(&str, &str)] = &[
    ("torus", "r*(R + r*cos(v))"),
    ("ellipsoid", "sqrt(b^2*c^2*sin(v)^4*cos(u)^2 + a^2*c^2*sin(u)^2*sin(v)^4 + a^2*b^2*sin(v)^2*cos(v)^2)"),
    ("greek", "alpha*β1 + phi_u*Omega_max - lambda^2*gamma_w"),
    ("words", "drop*rho/crown_radius + 2*drop*h1"),
    ("spheroid", "6378137^2*(1 - 0.0066943799901)*cos(lat)/(1 - 0.0066943799901*sin(lat)^2)^2"),
    ("fractions", "(1 + s^2/(4*f^2))^(3/2)*a/(b*c) - 1/(2*a) + 3/4*x1^(-2)"),
    ("functions", "asin(u)*sinh(2*u) + atan2(u, v)*u + log(abs(u - v)) + cbrt(u)^2*sign(v) + acosh(3)*u"),
    ("bare", "sin(u)*cos(v)*a*tan(u)^3*(u + v) + sin(u + v)^2 - 1/sin(v)^2 + sin(u)^(-1)"),
    ("exponentials", "exp(-u^2/(2*s^2))*exp(u) + exp(u*v + sqrt(u)/(1 + u*v*cos(u + v)) + a*b*c)"),
    ("special", "gamma(u)*erf(v) + bessel_j(0, u*v) + elliptic_k(a^2) + lgamma(u) - elliptic_e(1/2)"),
    ("numbers", "2*3^u*5 + u*7/11 + 1/3*sqrt(2)*v + 123456789.25*u"),
    ("pieces", "v*if(u < 0 and v <= 1, -u^2, if(not (u < v or v < 0), u*v, 1/u)) + min(u, v)"),
    ("roots", "sqrt(1 + diff(sqrt(u), u)^2)*abs(cos(u))/hypot(u, v)"),
    ("signs", "-(u - v)*(-a) + u*(-(b + v)) - (u - (v - a))"),
    (
        "long",
        "r*(R*cos(u)*sin(v) + r*cos(u)^2*cos(v)*sin(v) + a*b*c*sin(u)*cos(v)^3 + a^2*b*cos(2*u)*sin(3*v)^2 \
         + b^2*c*sin(u)^2*sin(v)*cos(v) - c^3*exp(-u)*cos(u*v) + a*u*v*(u + v)^2*sin(u - v) - R^2*r*cos(u + 2*v)) \
         + R*cos(u)*sin(v) + r*cos(u)^2*cos(v)*sin(v) + a*b*c*sin(u)*cos(v)^3 + a^2*b*cos(2*u)*sin(3*v)^2",
    ),
    (
        "long root",
        "a*sqrt((R*cos(u)*sin(v) + r*cos(u)^2*cos(v)*sin(v) + a*b*c*sin(u)*cos(v)^3 + a^2*b*cos(2*u)*sin(3*v)^2)^2 \
         + (b^2*c*sin(u)^2*sin(v)*cos(v) - c^3*exp(-u)*cos(u*v) + a*u*v*(u + v)^2*sin(u - v) - R^2*r*cos(u + 2*v))^2)",
    ),
    (
        "long product",
        "(R*cos(u)*sin(v) + r*cos(u)^2*cos(v)*sin(v))*(a*b*c*sin(u)*cos(v)^3 + a^2*b*cos(2*u))*\
         (b^2*c*sin(u)^2*sin(v)*cos(v) - c^3*exp(-u))*(a*u*v*(u + v)^2*sin(u - v) - R^2*r*cos(u + 2*v))",
    ),
];

const PARAMETERS: &[&str] = &[
    "R",
    "r",
    "a",
    "b",
    "c",
    "f",
    "s",
    "alpha",
    "β1",
    "phi_u",
    "Omega_max",
    "lambda",
    "gamma_w",
    "drop",
    "rho",
    "crown_radius",
    "h1",
    "x1",
    "lat",
];

/// The formula as a sheet's reader builds it; u and v are its variables.
fn form(formula: &str) -> Form {
    let parameters: String = PARAMETERS.iter().map(|name| format!("{name} = 0.5\n")).collect();
    let sheet = format!("{parameters}p(u, v) = ({formula}, 0, 0) on u in [0, 1], v in [0, 1]\n");
    let model = check(Source::new("forms.sheet", &sheet)).unwrap_or_else(|errors| panic!("{formula}: {errors:?}"));
    let patch = &model.patches[0];
    Form::of(&model.graph, patch.position[0], &patch.variables, 2000).expect("a short formula")
}

/// Every formula as an equation of its own, a vector, a differential, a definition, a condition.
fn document() -> Document {
    let mut equations: Vec<Equation> = FORMULAS.iter().map(|(_, formula)| Equation::new("W", form(formula))).collect();
    equations.push(Equation {
        name: "N".into(),
        right: ["-r*cos(u)*cos(v)*(R + r*cos(v))", "u/v", "sin(v)"].map(form).to_vec(),
        differentials: Vec::new(),
    });
    let area = |formula: &str| Equation {
        name: "dA".into(),
        right: vec![form(formula)],
        differentials: vec!["u".into(), "v".into()],
    };
    equations.push(area("R + r*cos(v)"));
    equations.push(area(FORMULAS[14].1));
    equations.push(Equation {
        name: "phi_v".into(),
        right: [12, 14, 15].map(|i| form(FORMULAS[i].1)).to_vec(),
        differentials: Vec::new(),
    });
    let name = |name: &str| Box::new(Form::Name(name.into(), NameKind::Parameter));
    Document {
        definitions: vec![Equation::new("e_2", form("f*(2 - f)"))],
        equations,
        conditions: vec![Form::Relation(">", name("R"), name("r"))],
    }
}

#[test]
fn formulas_look_as_in_a_paper() {
    let mut page = String::new();
    for (title, formula) in FORMULAS {
        let form = form(formula);
        page += &format!("== {title}\n{}\n-- LaTeX\n{}\n-- Typst\n{}\n", form.text(), latex(&form), typst(&form));
    }
    insta::assert_snapshot!("notation_formulas", page);
}

#[test]
fn mathml_looks_as_in_a_paper() {
    let page: String =
        FORMULAS.iter().map(|(title, formula)| format!("{title}\n{}\n", mathml(&form(formula)))).collect();
    insta::assert_snapshot!("notation_mathml", page);
}

#[test]
fn documents_have_their_lines() {
    let document = document();
    insta::assert_snapshot!(
        "notation_documents",
        format!("{}\n{}\n{}", document.latex(), document.typst(), document.mathml())
    );
}

/// Everything that is printed here: each formula by itself as an equation, and the document.
fn pages(print: fn(&Document) -> String) -> Vec<String> {
    let single = |(_, formula): &(&str, &str)| {
        print(&Document { equations: vec![Equation::new("W", form(formula))], ..Document::default() })
    };
    FORMULAS.iter().map(single).chain([print(&document())]).collect()
}

/// The first thing that the reader cannot read.
fn latex_problem(text: &str) -> Option<String> {
    let storage = pulldown_latex::Storage::new();
    pulldown_latex::Parser::new(text, &storage).find_map(|event| event.err().map(|error| error.to_string()))
}

#[test]
fn latex_is_read_by_pulldown_latex() {
    assert!(latex_problem(r"\frac{a}{b").is_some(), "the reader notices a missing bracket");
    for page in pages(Document::latex) {
        assert_eq!(latex_problem(&page), None, "{page}");
    }
    for (title, formula) in FORMULAS {
        assert_eq!(latex_problem(&latex(&form(formula))), None, "{title}");
    }
}

/// Runs a compiler in a folder of its own; `None` if the machine does not have it.
fn run(program: &Path, arguments: &[&str], file: &str, text: &str) -> Option<(bool, String)> {
    let folder = tempfile::tempdir().expect("a temporary folder");
    std::fs::write(folder.path().join(file), text).expect("a writable folder");
    let output = Command::new(program).args(arguments).current_dir(folder.path()).output().ok()?;
    let log = [output.stdout, output.stderr].map(|bytes| String::from_utf8_lossy(&bytes).into_owned()).concat();
    Some((output.status.success(), log))
}

/// `article` with `amsmath` and nothing else; a line that is too wide is in the log.
#[test]
fn latex_is_compiled_by_pdflatex() {
    let compile = |body: &str| {
        let text = format!(
            "\\documentclass{{article}}\n\\usepackage{{amsmath}}\n\\allowdisplaybreaks\n\\begin{{document}}\n{body}\\end{{document}}\n"
        );
        run(Path::new("pdflatex"), &["-interaction=nonstopmode", "-halt-on-error", "f.tex"], "f.tex", &text)
    };
    let Some((success, _)) = compile("$\\frac{a}{b$\n") else {
        return eprintln!("skipped: pdflatex is not installed");
    };
    assert!(!success, "the compiler notices a missing bracket");
    let mut body = pages(Document::latex).concat();
    for (_, formula) in FORMULAS {
        body += &format!("\\[{}\\]\n", latex(&form(formula)));
    }
    let (success, log) = compile(&body).expect("it ran before");
    assert!(success, "{log}");
    assert!(!log.contains("Overfull"), "{log}");
}

/// The interpreter of the folder that `.ci/test` fills, or the one of the machine.
fn python() -> PathBuf {
    let own = Path::new(env!("CARGO_MANIFEST_DIR")).join("target/checkers/bin/python");
    if own.exists() { own } else { "python3".into() }
}

#[test]
fn typst_is_compiled_by_typst() {
    const COMPILE: &str = "import typst; typst.compile('f.typ', output='f.pdf')";
    let compile = |body: &str| run(&python(), &["-c", COMPILE], "f.typ", body);
    let with_package = run(&python(), &["-c", "import typst"], "f.typ", "");
    if !with_package.is_some_and(|(success, _)| success) {
        return eprintln!("skipped: the Python package typst is not installed");
    }
    let (success, _) = compile("$ frac(a, nonsense) $").expect("it ran before");
    assert!(!success, "the compiler notices an unknown name");
    let mut body = pages(Document::typst).concat();
    for (_, formula) in FORMULAS {
        body += &format!("$ {} $\n", typst(&form(formula)));
    }
    let (success, log) = compile(&body).expect("it ran before");
    assert!(success, "{log}");
}

/// Elements of MathML Core (W3C Candidate Recommendation, section 2.1.2 and chapter 3), with the number of children that
/// layout needs.
const CORE: &[(&str, Option<usize>)] = &[
    ("math", None),
    ("mrow", None),
    ("mi", Some(0)),
    ("mn", Some(0)),
    ("mo", Some(0)),
    ("mtext", Some(0)),
    ("mspace", Some(0)),
    ("mfrac", Some(2)),
    ("msqrt", None),
    ("mroot", Some(2)),
    ("msup", Some(2)),
    ("msub", Some(2)),
    ("msubsup", Some(3)),
    ("mtable", None),
    ("mtr", None),
    ("mtd", None),
];

#[test]
fn mathml_is_core() {
    let singles = FORMULAS.iter().map(|(_, formula)| mathml(&form(formula)));
    for page in pages(Document::mathml).into_iter().chain(singles) {
        let document = roxmltree::Document::parse(&page).unwrap_or_else(|error| panic!("{error}: {page}"));
        let mut elements = 0;
        for node in document.descendants().filter(|node| node.tag_name().namespace().is_some()) {
            elements += 1;
            let name = node.tag_name().name();
            assert_eq!(node.tag_name().namespace(), Some("http://www.w3.org/1998/Math/MathML"));
            let core = CORE.iter().find(|(core, _)| *core == name);
            let (_, children) = core.unwrap_or_else(|| panic!("{name} is not in MathML Core"));
            let count = node.children().filter(roxmltree::Node::is_element).count();
            assert!(children.is_none_or(|children| children == count), "{name} with {count} children in {page}");
            for attribute in node.attributes() {
                let known = ["display", "displaystyle", "mathvariant", "form", "stretchy", "width", "style"];
                assert!(known.contains(&attribute.name()), "{}", attribute.name());
                // The only value that Core knows.
                assert!(attribute.name() != "mathvariant" || attribute.value() == "normal");
            }
        }
        assert!(elements > 4, "{page}");
    }
}

/// Names that look alike keep apart, names of every kind are readable.
#[test]
fn names_stay_different_and_readable() {
    let name = |name: &str| Form::Name(name.to_owned(), NameKind::Parameter);
    let names = [
        "R1",
        "R_1",
        "α",
        "alpha",
        "_",
        "a_",
        "_a__b",
        "x_1_2",
        "ü",
        "Länge_ß",
        "q",
        "w_1",
        "d_A",
        "Pi",
        "o",
        "omicron",
    ];
    let sum = Form::Sum(names.iter().map(|text| (false, name(text))).collect());
    let shown = latex(&sum);
    assert_eq!(latex_problem(&shown), None, "{shown}");
    let typeset = typst(&sum);
    let terms: std::collections::HashSet<&str> = typeset.split(['+', '\\', '&']).map(str::trim).collect();
    assert!(terms.len() >= names.len(), "{typeset}");
    roxmltree::Document::parse(&mathml(&sum)).expect("well-formed");
}

/// Deep and wide formulas: no line is too deep for the readers, nothing grows without bound.
#[test]
fn deep_formulas_are_cut_into_parts() {
    let mut deep = Form::Name("u".into(), NameKind::Variable);
    for _ in 0..400 {
        deep = Form::Call("sqrt".into(), vec![Form::Sum(vec![(false, deep), (true, Form::integer(1))])]);
    }
    let shown = latex(&deep);
    assert_eq!(latex_problem(&shown), None);
    let deepest = shown.lines().map(|line| line.matches(r"\sqrt").count()).max().unwrap();
    assert!(deepest < 30, "{deepest} roots within each other");
    assert!(shown.len() < 20_000, "{}", shown.len());
}

/// One step of a random formula of x and y; `None` where it is undefined, large, or beside a jump.
fn step(
    graph: &mut Graph,
    symbols: [SymbolId; 2],
    point: [f64; 2],
    nodes: &[ExpressionId],
    code: [usize; 4],
) -> Option<ExpressionId> {
    let value =
        |graph: &Graph, id| evaluate_one(graph, id, |symbol| if symbol == symbols[0] { point[0] } else { point[1] });
    let [a, b, c] = [1, 2, 3].map(|place| nodes[nodes.len() - 1 - code[place] % nodes.len()]);
    let apart = (value(graph, a) - value(graph, b)).abs() > 0.01;
    let named = Function::NAMED[code[3] % Function::NAMED.len()];
    let exponents = [(2, 1), (3, 1), (-1, 1), (-2, 1), (1, 2), (-3, 2), (1, 3), (-5, 4)];
    let (top, bottom) = exponents[code[2] % exponents.len()];
    let node = match code[0] % 14 {
        0 | 1 => graph.add(a, b),
        2 => graph.subtract(a, b),
        3 | 4 => graph.multiply(a, b),
        5 => graph.divide(a, b),
        6 => graph.negate(a),
        7 => {
            let exponent = graph.fraction(top, bottom);
            graph.power(a, exponent)
        }
        8 => graph.power(a, b),
        9 if apart => graph.call2(BinaryFunction::NAMED[code[3] % 4], a, b),
        10 if apart => {
            let (less, at_most) = (graph.less(a, b), graph.less_equal(b, a));
            let condition = match code[3] % 4 {
                0 => less,
                1 => graph.not(at_most),
                2 => graph.or(less, at_most),
                _ => graph.and(less, at_most),
            };
            graph.select(condition, c, a)
        }
        11 => graph.call(Function::BesselJ((code[3] % 2) as u8), a),
        // A step where x*1e-3 changes sign would be a jump.
        12 if named != Function::Sign || value(graph, a).abs() > 0.01 => graph.call(named, a),
        _ => graph.fraction(code[2] as i64 - 9, 1 + code[3] as i64),
    };
    let result = value(graph, node);
    // Rounding grows with the steepness; a value that moves much when x moves little proves nothing.
    let moved =
        evaluate_one(graph, node, |symbol| if symbol == symbols[0] { point[0] + 1e-9 } else { point[1] - 1e-9 });
    (result.is_finite() && result.abs() < 1e3 && (moved - result).abs() < 1e-4).then_some(node)
}

proptest! {
    #![proptest_config(ProptestConfig::with_cases(2_000))]

    /// The text of a formula means the formula: the sheet's own reader reads it back.
    #[test]
    fn text_reads_back(
        codes in prop::collection::vec([0usize..100, 0usize..6, 0usize..18, 0usize..26], 1..25),
        x in 0.1..2.0_f64,
        y in -2.0..2.0_f64,
    ) {
        let mut graph = Graph::new();
        let symbols = ["x", "y"].map(|name| graph.new_symbol(name));
        let mut nodes = symbols.map(|symbol| graph.symbol(symbol)).to_vec();
        for code in codes {
            nodes.extend(step(&mut graph, symbols, [x, y], &nodes, code));
        }
        let root = nodes[nodes.len() - 1];
        let form = Form::of(&graph, root, &symbols, 2_000);
        prop_assume!(form.is_some());
        let text = form.expect("just tested").text();
        let sheet = format!("p(x, y) = ({text}, 0, 0) on x in [0, 1], y in [0, 1]\n");
        let model = check(Source::new("text.sheet", &sheet));
        prop_assert!(model.is_ok(), "{text}: {:?}", model.err());
        let model = model.expect("just tested");
        let patch = &model.patches[0];
        let expected = evaluate_one(&graph, root, |symbol| if symbol == symbols[0] { x } else { y });
        let found = evaluate_one(&model.graph, patch.position[0], |symbol| if symbol == patch.variables[0] { x } else { y });
        // Sums are written without their inner parentheses, so the last digits differ.
        prop_assert!((found - expected).abs() <= 1e-6 * (1.0 + expected.abs()), "{text}: {found} instead of {expected}");
    }
}
