//! The one list of methods: names, orders, sources. Everything else that speaks of
//! methods reads it from here.

/// An integration method.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Method {
    /// Its name in reports.
    pub name: &'static str,
    /// Other names under which a claim may state it.
    pub aliases: &'static [&'static str],
    /// Its order on smooth problems.
    pub order: u8,
    /// Where it is published; tags resolve in [`crate::references`].
    pub source: &'static str,
}

const fn method(
    name: &'static str,
    aliases: &'static [&'static str],
    order: u8,
    source: &'static str,
) -> Method {
    Method {
        name,
        aliases,
        order,
        source,
    }
}

/// All methods, one-step methods first.
pub const METHODS: &[Method] = &[
    method(
        "forward Euler",
        &["explicit Euler", "Euler"],
        1,
        "[hairer-norsett-wanner-1993] II.1",
    ),
    method(
        "backward Euler",
        &["implicit Euler", "BDF 1"],
        1,
        "[hairer-wanner-1996] IV.3",
    ),
    method(
        "semi-implicit Euler",
        &["symplectic Euler"],
        1,
        "[hairer-norsett-wanner-1993] II.16",
    ),
    method(
        "exponential Euler",
        &[],
        1,
        "[hochbruck-ostermann-2010] 2.1",
    ),
    method(
        "trapezoidal",
        &["trapezoidal rule", "Crank-Nicolson"],
        2,
        "[hairer-wanner-1996] IV.3",
    ),
    method(
        "implicit midpoint",
        &["Gauss 2"],
        2,
        "[hairer-wanner-1996] IV.5",
    ),
    method(
        "explicit midpoint",
        &["midpoint"],
        2,
        "[hairer-norsett-wanner-1993] II.1",
    ),
    method(
        "Heun",
        &["improved Euler", "RK2"],
        2,
        "[hairer-norsett-wanner-1993] II.1",
    ),
    method("Ralston", &[], 2, "[ralston-1962]"),
    method("SDIRK 2", &[], 2, "[alexander-1977]"),
    method("Rosenbrock 2", &[], 2, "[hairer-wanner-1996] IV.7"),
    method(
        "Kutta 3",
        &["RK3", "Kutta's third order"],
        3,
        "[hairer-norsett-wanner-1993] II.1",
    ),
    method("SSP 3", &["SSPRK3"], 3, "[shu-osher-1988]"),
    method("SDIRK 3", &[], 3, "[alexander-1977]"),
    method("Radau IIA 3", &[], 3, "[hairer-wanner-1996] IV.5"),
    method(
        "classical RK4",
        &["RK4", "Runge-Kutta 4"],
        4,
        "[hairer-norsett-wanner-1993] II.1",
    ),
    method("3/8 rule", &[], 4, "[hairer-norsett-wanner-1993] II.1"),
    method("Gauss 4", &[], 4, "[hairer-wanner-1996] IV.5"),
    method(
        "Runge-Kutta-Fehlberg",
        &["RKF45", "Fehlberg 5"],
        5,
        "[hairer-norsett-wanner-1993] II.5",
    ),
    method("Dormand-Prince 5", &["DOPRI5"], 5, "[dormand-prince-1980]"),
    method("Radau IIA 5", &[], 5, "[hairer-wanner-1996] IV.5"),
    method("Gauss 6", &[], 6, "[hairer-wanner-1996] IV.5"),
    method(
        "Lobatto IIIC",
        &["Lobatto IIIC 2"],
        2,
        "[hairer-wanner-1996] IV.5",
    ),
    method("BDF 2", &[], 2, "[hairer-norsett-wanner-1993] III.1"),
    method("BDF 3", &[], 3, "[hairer-norsett-wanner-1993] III.1"),
    method("BDF 4", &[], 4, "[hairer-norsett-wanner-1993] III.1"),
    method("BDF 5", &[], 5, "[hairer-norsett-wanner-1993] III.1"),
    method(
        "Adams-Bashforth 2",
        &["AB2"],
        2,
        "[hairer-norsett-wanner-1993] III.1",
    ),
    method(
        "Adams-Bashforth 3",
        &["AB3"],
        3,
        "[hairer-norsett-wanner-1993] III.1",
    ),
    method(
        "Adams-Bashforth 4",
        &["AB4"],
        4,
        "[hairer-norsett-wanner-1993] III.1",
    ),
    method(
        "Adams-Bashforth 5",
        &["AB5"],
        5,
        "[hairer-norsett-wanner-1993] III.1",
    ),
    method(
        "Adams-Moulton 3",
        &["AM3"],
        3,
        "[hairer-norsett-wanner-1993] III.1",
    ),
    method(
        "Adams-Moulton 4",
        &["AM4"],
        4,
        "[hairer-norsett-wanner-1993] III.1",
    ),
    method(
        "Adams-Moulton 5",
        &["AM5"],
        5,
        "[hairer-norsett-wanner-1993] III.1",
    ),
];

/// The method of that name or alias, without regard to case, blanks and hyphens.
pub fn find(name: &str) -> Option<&'static Method> {
    let wanted = plain(name);
    METHODS.iter().find(|method| {
        plain(method.name) == wanted || method.aliases.iter().any(|alias| plain(alias) == wanted)
    })
}

fn plain(name: &str) -> String {
    let letters = name.chars().filter(|c| c.is_alphanumeric() || *c == '/');
    letters.flat_map(char::to_lowercase).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_and_aliases_are_unique_and_every_method_has_a_source() {
        let mut names = Vec::new();
        for method in METHODS {
            names.push(plain(method.name));
            names.extend(method.aliases.iter().map(|alias| plain(alias)));
            assert!(method.source.starts_with('['), "{}", method.name);
        }
        names.sort();
        assert!(names.windows(2).all(|pair| pair[0] != pair[1]), "{names:?}");
    }

    #[test]
    fn claims_are_found_however_they_are_spelled() {
        assert_eq!(find("Forward euler").unwrap().name, "forward Euler");
        assert_eq!(find("rk4").unwrap().order, 4);
        assert_eq!(find("BDF-2").unwrap().name, "BDF 2");
        assert_eq!(find("no such method"), None);
    }
}
