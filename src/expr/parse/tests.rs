use super::*;
use crate::quantity::Dim;
use proptest::prelude::*;

const SPICE: Syntax = Syntax::Spice { mega: false };

/// The tree in brackets: `(+ 1 (* 2 3))`.
fn tree(text: &str, syntax: Syntax) -> String {
    let expr = parse(text, syntax).unwrap_or_else(|fault| panic!("{text}: {fault:?}"));
    let mut shown: Vec<String> = Vec::new();
    for node in &expr.nodes {
        let of = |at: &u32| shown[*at as usize].clone();
        shown.push(match node {
            Node::Number { value, dim } if *dim == Dim::NONE => format!("{value}"),
            Node::Number { value, dim } => format!("{value}[{dim}]"),
            Node::Text(text) => format!("'{text}'"),
            Node::Name(name) => name.clone(),
            Node::Call { name, args } => format!("{name}({})", args.iter().map(of).collect::<Vec<_>>().join(" ")),
            Node::Unary(Unary::Negate, operand) => format!("(- {})", of(operand)),
            Node::Unary(Unary::Not, operand) => format!("(! {})", of(operand)),
            Node::Binary(operator, left, right) => format!("({operator:?} {} {})", of(left), of(right)),
            Node::Choose(condition, yes, no) => format!("(? {} {} {})", of(condition), of(yes), of(no)),
        });
    }
    shown.pop().unwrap()
}

fn fault(text: &str, syntax: Syntax) -> Fault {
    let fault = parse(text, syntax).err().unwrap_or_else(|| panic!("{text} is read"));
    assert!(text.get(fault.at.start as usize..fault.at.end as usize).is_some(), "{text}: {fault:?}");
    fault
}

/// Ngspice User's Manual v39, section 2.9.5: the table of precedence, and "operators of equal precedence are evaluated from left
/// to right".
#[test]
fn precedence() {
    let table = [
        ("2**3**2", "(Power (Power 2 3) 2)"),
        ("2^3^2", "(Power (Power 2 3) 2)"),
        ("-2**2", "(Power (- 2) 2)"),
        ("!a && b", "(And (! a) b)"),
        ("a ** -b", "(Power a (- b))"),
        ("a+b*c", "(Add a (Multiply b c))"),
        ("a*b+c", "(Add (Multiply a b) c)"),
        ("a-b-c", "(Subtract (Subtract a b) c)"),
        ("a/b/c", "(Divide (Divide a b) c)"),
        ("a*b**c", "(Multiply a (Power b c))"),
        ("a%b\\c", "(IntegerDivide (Remainder a b) c)"),
        ("a+b<c*d", "(Less (Add a b) (Multiply c d))"),
        ("a<b==c", "(Equal (Less a b) c)"),
        ("a<>b != c", "(NotEqual (NotEqual a b) c)"),
        ("a<=b && c>=d || e>f", "(Or (And (LessEqual a b) (GreaterEqual c d)) (Greater e f))"),
        ("a||b&&c", "(Or a (And b c))"),
        ("a||b?c:d", "(? (Or a b) c d)"),
        ("(a+b)*c", "(Multiply (Add a b) c)"),
        ("{a+b}*c", "(Multiply (Add a b) c)"),
        ("2--3", "(Subtract 2 (- 3))"),
        ("2*-3", "(Multiply 2 (- 3))"),
        ("+a", "a"),
        ("-+-a", "(- (- a))"),
        ("max(a, b+1)", "max(a (Add b 1))"),
        ("f()", "f()"),
        ("f(g(x),-1)", "f(g(x) (- 1))"),
        ("ternary_fcn(a,b,c)", "(? a b c)"),
        ("a ? b ? 1 : 2 : 3", "(? a (? b 1 2) 3)"),
    ];
    for (text, expected) in table {
        assert_eq!(tree(text, SPICE), expected, "{text}");
    }
}

/// Observed with the circuit simulator ngspice, version 39: `1?2:0?3:4` is 2 and `0?1:0?2:3` is 3.
#[test]
fn a_choice_in_the_last_branch() {
    assert_eq!(tree("1?2:0?3:4", SPICE), "(? 1 2 (? 0 3 4))");
}

#[test]
fn netlist_literals_and_names() {
    let table = [
        ("2.5u*3", "(Multiply 0.0000025 3)"),
        ("10MEGohm", "10000000"),
        ("10kohm+1", "(Add 10000 1)"),
        ("1e-3-1", "(Subtract 0.001 1)"),
        ("@m1[id]*w_1.x#2", "(Multiply @m1[id] w_1.x#2)"),
        ("lvn5_w / nf", "(Divide lvn5_w nf)"),
    ];
    for (text, expected) in table {
        assert_eq!(tree(text, SPICE), expected, "{text}");
    }
    assert_eq!(tree("10M", Syntax::Spice { mega: true }), "10000000");
}

/// Continuation lines are joined by their leading `+` (Ngspice User's Manual v39, section 2.1.1), also across comment lines.
#[test]
fn lines_go_on_behind_a_plus() {
    let table = [
        ("a +\n+ b", "(Add a b)"),
        ("a\n+ + b", "(Add a b)"),
        ("a\r\n+ * b", "(Multiply a b)"),
        ("a\n* a comment + 1\n\n  \n+ * b", "(Multiply a b)"),
        ("a $ comment * 2\n+ *b ; and\n+ -c // more", "(Subtract (Multiply a b) c)"),
        ("\n+ a", "a"),
    ];
    for (text, expected) in table {
        assert_eq!(tree(text, SPICE), expected, "{text:?}");
    }
    let text = "a\n+ * bb";
    let expr = parse(text, SPICE).unwrap();
    assert_eq!(expr.places, [0..1, 6..8, 0..8]);
}

#[test]
fn rules_have_units_texts_and_words() {
    let table = [
        ("width <= 2000um", "(LessEqual width 0.002[m])"),
        ("12V/2", "(Divide 12[V] 2)"),
        ("density > 3uA/um", "(Greater density 3[A/m])"),
        ("duty <= 1% && on", "(And (LessEqual duty 0.01) on)"),
        ("takes * 1MHz", "(Multiply takes 1000000[Hz])"),
        ("class.fingers.min == 2", "(Equal class.fingers.min 2)"),
        ("pin.iso.net == 'VIN'", "(Equal pin.iso.net 'VIN')"),
        ("param(\"x y\")", "param('x y')"),
        ("v(iso, s).max < 5V", "(Less v.max(iso s) 5[V])"),
        ("net('d').reach.max", "net.reach.max('d')"),
        ("a and not b or c", "(Or (And a (! b)) c)"),
        ("not a == b and c", "(And (! (Equal a b)) c)"),
        ("not(a) AND b", "(And (! a) b)"),
        ("a == not b", "(Equal a (! b))"),
        ("not a < b == c", "(! (Equal (Less a b) c))"),
        ("if(on, 5V, 48V)", "(? on 5[V] 48[V])"),
        ("notch", "notch"),
    ];
    for (text, expected) in table {
        assert_eq!(tree(text, Syntax::Rule), expected, "{text}");
    }
}

#[test]
fn places_are_those_of_the_text() {
    let text = "(ab + 1V) * f(x).max";
    let expr = parse(text, Syntax::Rule).unwrap();
    let shown: Vec<&str> = expr.places.iter().map(|at| &text[at.start as usize..at.end as usize]).collect();
    assert_eq!(shown, ["ab", "1V", "ab + 1V", "x", "f(x).max", text]);
    assert_eq!(expr.root(), 5);
}

#[test]
fn faults_point_at_what_is_wrong() {
    let table = [
        ("", "", "empty"),
        ("  ", "", "empty"),
        ("1 +", "+", "missing behind `+`"),
        ("1 + * 2", "*", "missing before `*`"),
        ("(1", "(", "not closed"),
        ("{1)", "{", "not closed"),
        ("f(1", "(", "not closed"),
        ("f(1,", ",", "missing behind `,`"),
        ("f(,1)", ",", "missing before `,`"),
        ("1)", ")", "closes nothing"),
        ("()", ")", "missing before `)`"),
        ("a b", "b", "operator is missing before `b`"),
        ("2 (3)", "(", "operator is missing"),
        ("1.2.3", ".3", "operator is missing"),
        ("1, 2", ",", "comma"),
        ("(1, 2)", ",", "comma"),
        ("a ? b", "?", "no `:`"),
        ("(a ? b) : c", "?", "no `:`"),
        ("a : b", ":", "no `?`"),
        ("f(a ? b, c)", "?", "no `:`"),
        ("a = b", "=", "no meaning"),
        ("a & b", "&", "no meaning"),
        ("1e999", "1e999", "too large"),
        ("'a'", "'", "no meaning"),
        ("a µ ≤ b", "µ", "operator is missing"),
    ];
    for (text, marked, part) in table {
        let fault = fault(text, SPICE);
        assert_eq!(&text[fault.at.start as usize..fault.at.end as usize], marked, "{text}: {}", fault.message);
        assert!(fault.message.contains(part), "{text}: {}", fault.message);
    }
    assert_eq!(fault("a = b", SPICE).help.as_deref(), Some("write `==` to compare"));
}

#[test]
fn faults_of_rules() {
    let table = [
        ("x <= 5mhz", "5mhz", "capitals count"),
        ("x == 'abc", "'", "not closed"),
        ("if(a, b)", "if(a, b)", "`if` takes"),
        ("a. b", ".", "no meaning"),
        ("a ≤ b", "≤", "no meaning"),
        ("x < 3kk", "3kk", "no unit"),
        ("not", "not", "missing behind"),
        ("{x}", "{", "no meaning"),
    ];
    for (text, marked, part) in table {
        let fault = fault(text, Syntax::Rule);
        assert_eq!(&text[fault.at.start as usize..fault.at.end as usize], marked, "{text}: {}", fault.message);
        assert!(fault.message.contains(part), "{text}: {}", fault.message);
    }
}

#[test]
fn long_and_deep_texts_end_quickly() {
    let clock = std::time::Instant::now();
    for syntax in [SPICE, Syntax::Rule] {
        let chain = format!("1{}", "+1".repeat(100_000));
        assert_eq!(parse(&chain, syntax).unwrap().nodes.len(), 200_001);
        assert!(fault(&format!("{}1{}", "(".repeat(10_000), ")".repeat(10_000)), syntax).message.contains("250"));
        assert!(fault(&"f(".repeat(10_000), syntax).message.contains("250"));
        assert!(fault(&"1+".repeat(5 << 20), syntax).message.contains("4 MB"));
        assert!(parse(&format!("{}1", "-".repeat(100_000)), syntax).is_ok());
        assert!(parse(&format!("{}1", "1?1:".repeat(100_000)), syntax).is_ok());
        assert!(parse(&format!("{}1{}", "1?".repeat(100_000), ":1".repeat(100_000)), syntax).is_ok());
        assert!(parse(&format!("{}1{}", "(".repeat(250), ")".repeat(250)), syntax).is_ok());
        assert!(parse(&"9".repeat(1 << 20), syntax).is_err());
    }
    assert!(clock.elapsed().as_secs() < 20);
}

proptest! {
    #[test]
    fn any_text_is_harmless(text in "(\\PC|[-+*/a1 ().,?:<>=!&|'\"{}\n$;µ%]){0,40}", rule in any::<bool>()) {
        match parse(&text, if rule { Syntax::Rule } else { SPICE }) {
            Ok(expr) => {
                prop_assert!(!expr.nodes.is_empty());
                prop_assert_eq!(expr.nodes.len(), expr.places.len());
                for place in &expr.places {
                    prop_assert!(text.get(place.start as usize..place.end as usize).is_some());
                }
            }
            Err(fault) => prop_assert!(text.get(fault.at.start as usize..fault.at.end as usize).is_some()),
        }
    }

    #[test]
    fn operands_come_before_operators(text in "[-!]?[ab1](([-+*/<]|&&|\\?1:)[-!]{0,2}[ab1]){0,12}") {
        let expr = parse(&text, SPICE).unwrap();
        for (at, node) in expr.nodes.iter().enumerate() {
            let below = |operand: &u32| (*operand as usize) < at;
            let ordered = match node {
                Node::Unary(_, operand) => below(operand),
                Node::Binary(_, left, right) => below(left) && below(right),
                Node::Choose(condition, yes, no) => below(condition) && below(yes) && below(no),
                Node::Call { args, .. } => args.iter().all(below),
                _ => true,
            };
            prop_assert!(ordered);
        }
    }
}
