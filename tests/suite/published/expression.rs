//! Expressions of the records, written anew in the worksheet's own formula language and evaluated by it.

use std::collections::BTreeMap;
use std::sync::Arc;

use qsheaf::formula::Formula;
use qsheaf::source::Place;

/// Values of names, SI units.
pub type Names = BTreeMap<String, f64>;

/// What a call of the records gives that no formula can: a gain, a resistance of the network.
pub type Ask<'a> = dyn Fn(&str, &[String]) -> Result<Option<f64>, String> + 'a;

/// The value of an expression.
pub fn value(text: &str, names: &Names, ask: &Ask) -> Result<f64, String> {
    let formula = Translation { text: text.as_bytes(), at: 0, ask }.whole()?;
    let file: Arc<str> = "published".into();
    let parsed = Formula::parse(&formula, &Place::new(&file, 1, 1, 0))
        .map_err(|errors| format!("{formula}: {}", errors.0[0].message))?;
    let keys: Vec<&String> = names.keys().collect();
    let tape = parsed
        .compile(&|name| keys.iter().position(|key| *key == name))
        .map_err(|error| format!("{formula}: {}", error.message))?;
    let values: Vec<f64> = names.values().copied().collect();
    Ok(tape.eval(&values))
}

struct Translation<'a> {
    text: &'a [u8],
    at: usize,
    ask: &'a Ask<'a>,
}

impl Translation<'_> {
    fn whole(mut self) -> Result<String, String> {
        let found = self.until(&[])?;
        if self.at < self.text.len() { Err("brackets do not match".to_owned()) } else { Ok(found) }
    }

    /// Translates up to one of `ends` at this level of brackets.
    fn until(&mut self, ends: &[u8]) -> Result<String, String> {
        let mut out = String::new();
        while let Some(&byte) = self.text.get(self.at) {
            if ends.contains(&byte) {
                break;
            }
            if byte.is_ascii_alphabetic() {
                out += &self.name()?;
            } else if byte.is_ascii_digit() {
                out += self.number();
            } else if byte == b'(' {
                self.at += 1;
                let inner = self.until(b")")?;
                self.at += 1;
                out += &format!("({inner})");
            } else if self.text[self.at..].starts_with(b"**") {
                out.push('^');
                self.at += 2;
            } else {
                out.push(char::from(byte));
                self.at += 1;
            }
        }
        Ok(out)
    }

    fn number(&mut self) -> &str {
        let start = self.at;
        while let Some(&byte) = self.text.get(self.at) {
            let exponent = self.at > start && matches!(self.text[self.at - 1], b'e' | b'E');
            if byte.is_ascii_digit()
                || matches!(byte, b'.' | b'e' | b'E')
                || exponent && matches!(byte, b'-' | b'+')
            {
                self.at += 1;
            } else {
                break;
            }
        }
        std::str::from_utf8(&self.text[start..self.at]).unwrap()
    }

    fn name(&mut self) -> Result<String, String> {
        let start = self.at;
        while self.text.get(self.at).is_some_and(|b| b.is_ascii_alphanumeric() || matches!(b, b'_' | b'.')) {
            self.at += 1;
        }
        let name = std::str::from_utf8(&self.text[start..self.at]).unwrap().to_owned();
        if self.text.get(self.at) != Some(&b'(') {
            return Ok(if name == "pi" { "180 deg".to_owned() } else { name });
        }
        let first = self.at + 1;
        let mut arguments = Vec::new();
        while self.text.get(self.at).is_some_and(|byte| *byte != b')') {
            self.at += 1;
            arguments.push(self.until(b",)")?);
        }
        let written = std::str::from_utf8(&self.text[first..self.at]).unwrap();
        self.at += 1;
        let raw: Vec<String> =
            written.split(',').map(|argument| argument.trim_matches(['"', ' ']).to_owned()).collect();
        if let Some(found) = (self.ask)(&name, &raw)? {
            return Ok(format!("({found:e})"));
        }
        function(&name, &arguments)
    }
}

/// The hand formulas that the records call by name.
fn function(name: &str, arguments: &[String]) -> Result<String, String> {
    let of: Vec<String> = arguments.iter().map(|argument| format!("({})", argument.trim())).collect();
    let rest = |from: usize| of[from..].join(" + ");
    Ok(match (name, of.as_slice()) {
        ("par", all) => {
            let sum: Vec<String> = all.iter().map(|one| format!("1/{one}")).collect();
            format!("(1/({}))", sum.join(" + "))
        }
        ("log", [x]) => format!("ln{x}"),
        ("sqrt" | "abs" | "exp", [x]) => format!("{name}{x}"),
        ("min", [a, b]) => format!("min({a}, {b})"),
        // The corner frequency of a resistance and a capacitance, and the capacitance for a frequency.
        ("f_rc" | "c_for", [a, b]) => format!("(1/(2*180 deg*{a}*{b}))"),
        // Dissipation for a junction temperature, and the other way about.
        ("p_max", [t_j, t_a, ..]) => format!("(({t_j} - {t_a})/({}))", rest(2)),
        ("tj_of", [t_a, power, r_th]) => format!("({t_a} + {power}*{r_th})"),
        ("derated", [power, per_kelvin, t]) => format!("({power} - {per_kelvin}*({t} - 25))"),
        // Leakage doubles every 10 K (common practice).
        ("icbo_at", [cold, rise]) => format!("({cold}*2^({rise}/10))"),
        ("widlar_re", [v_t, reference, output]) => format!("({v_t}/{output}*ln({reference}/{output}))"),
        ("db20", [ratio]) => format!("(20*log10{ratio})"),
        // Stability factor of a divider-biased stage, and of one fed back from its collector.
        ("s_ico", [beta, base, emitter]) => {
            format!("((1 + {beta})/(1 + {beta}*{emitter}/({base} + {emitter})))")
        }
        ("s_ico", [beta, base, emitter, collector]) => {
            let load = format!("({emitter} + {collector})");
            format!("((1 + {beta})/(1 + {beta}*{load}/({base} + {load})))")
        }
        _ => return Err(format!("`{name}` with {} arguments is unknown", of.len())),
    })
}
