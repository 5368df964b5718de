//! The one list of methods: names, coefficients, orders, sources. Everything else that
//! speaks of methods reads it from here.

use super::scheme::Scheme::{self, Exponential, Multistep, Predicted, Rosenbrock, SemiImplicit};
use super::scheme::Slopes;

/// An integration method.
#[derive(Clone, Copy, Debug, PartialEq)]
pub struct Method {
    /// Its name in reports.
    pub name: &'static str,
    /// Other names under which a claim may state it. A name that the trade uses for
    /// several methods stands with each of them.
    pub aliases: &'static [&'static str],
    /// Its order on smooth problems.
    pub order: u8,
    /// Where it is published; tags resolve in [`crate::references`].
    pub source: &'static str,
    /// Its coefficients; where codes differ in a detail under one name, the usual form
    /// comes first.
    pub schemes: &'static [Scheme],
}

const fn method(
    name: &'static str,
    aliases: &'static [&'static str],
    order: u8,
    source: &'static str,
    schemes: &'static [Scheme],
) -> Method {
    Method {
        name,
        aliases,
        order,
        source,
        schemes,
    }
}

const fn stages(matrix: &'static str, weights: &'static str) -> Scheme {
    Scheme::RungeKutta { matrix, weights }
}

/// Two stages, the second at the end of the step.
const fn at_end(gamma: &'static str, shift: &'static str, slopes: Slopes) -> Scheme {
    Rosenbrock {
        gamma,
        alpha: "0; 1",
        shift,
        weights: "1/2 1/2",
        slopes,
    }
}

/// Two stages, the second halfway, which alone counts.
const fn halfway(slopes: Slopes) -> Scheme {
    Rosenbrock {
        gamma: "1-sqrt(2)/2",
        alpha: "0; 1/2",
        shift: "0; -1+sqrt(2)/2",
        weights: "0 1",
        slopes,
    }
}

const ONE_STEP: &str = "[hairer-norsett-wanner-1993] II.1";
const STIFF: &str = "[hairer-wanner-1996] IV.5";
const EULERS: &str = "[hairer-wanner-1996] IV.3";
const ADAMS: &str = "[hairer-norsett-wanner-1993] III.1";

/// The explicit stages that Fehlberg's two formulas share.
const FEHLBERG: &str = "0; 1/4; 3/32 9/32; 1932/2197 -7200/2197 7296/2197; \
    439/216 -8 3680/513 -845/4104; -8/27 2 -3544/2565 1859/4104 -11/40";

/// All methods: one-step methods by order, then multistep methods.
pub static METHODS: &[Method] = &[
    method(
        "forward Euler",
        &["explicit Euler", "Euler", "RK1", "Adams-Bashforth 1", "AB1"],
        1,
        ONE_STEP,
        &[stages("0", "1")],
    ),
    method(
        "backward Euler",
        &[
            "implicit Euler",
            "linearly implicit Euler",
            "semi-implicit Euler",
            "BDF 1",
            "Radau IIA 1",
        ],
        1,
        EULERS,
        &[stages("1", "1")],
    ),
    method(
        "semi-implicit Euler",
        &["symplectic Euler", "Euler-Cromer"],
        1,
        "[hairer-norsett-wanner-1993] II.16",
        &[SemiImplicit],
    ),
    method(
        "exponential Euler",
        &["exponential time differencing 1", "ETD1"],
        1,
        "[hochbruck-ostermann-2010] 2.1",
        &[
            Exponential { by_state: false },
            Exponential { by_state: true },
        ],
    ),
    method(
        "trapezoidal",
        &[
            "trapezoidal rule",
            "trapezoid",
            "Crank-Nicolson",
            "Adams-Moulton 2",
            "AM2",
        ],
        2,
        EULERS,
        &[stages("0; 1/2 1/2", "1/2 1/2")],
    ),
    method(
        "implicit midpoint",
        &["Gauss 2", "implicit midpoint rule"],
        2,
        STIFF,
        &[stages("1/2", "1")],
    ),
    method(
        "explicit midpoint",
        &["midpoint", "RK2", "Runge-Kutta 2", "modified Euler"],
        2,
        ONE_STEP,
        &[stages("0; 1/2", "0 1")],
    ),
    method(
        "Heun",
        &[
            "improved Euler",
            "RK2",
            "Runge-Kutta 2",
            "modified Euler",
            "explicit trapezoidal",
            "SSP 2",
        ],
        2,
        ONE_STEP,
        &[stages("0; 1", "1/2 1/2")],
    ),
    method(
        "Ralston",
        &["RK2", "Runge-Kutta 2", "Ralston 2"],
        2,
        "[ralston-1962]",
        &[stages("0; 2/3", "1/4 3/4")],
    ),
    method(
        "SDIRK 2",
        &["SDIRK2", "DIRK2"],
        2,
        "[alexander-1977]",
        &[
            stages(
                "1-sqrt(2)/2; sqrt(2)/2 1-sqrt(2)/2",
                "sqrt(2)/2 1-sqrt(2)/2",
            ),
            stages(
                "1+sqrt(2)/2; -sqrt(2)/2 1+sqrt(2)/2",
                "-sqrt(2)/2 1+sqrt(2)/2",
            ),
        ],
    ),
    method(
        "TR-BDF2",
        &["TRBDF2"],
        2,
        "[bank-1985], [hosea-shampine-1996]",
        &[stages(
            "0; 1-sqrt(2)/2 1-sqrt(2)/2; sqrt(2)/4 sqrt(2)/4 1-sqrt(2)/2",
            "sqrt(2)/4 sqrt(2)/4 1-sqrt(2)/2",
        )],
    ),
    method(
        "Lobatto IIIC 2",
        &["Lobatto IIIC"],
        2,
        STIFF,
        &[stages("1/2 -1/2; 1/2 1/2", "1/2 1/2")],
    ),
    method(
        "Rosenbrock 2",
        &["ROS2", "Rosenbrock"],
        2,
        "[hairer-wanner-1996] IV.7, [verwer-1999], [shampine-reichelt-1997]",
        &[
            at_end("1-sqrt(2)/2", "0; -2+sqrt(2)", Slopes::Known),
            at_end("1+sqrt(2)/2", "0; -2-sqrt(2)", Slopes::Known),
            halfway(Slopes::Known),
            // What the runs of ode23s under tests/outside show to rounding at four steps: the
            // slope of the inputs is a difference over a tenth of the step.
            halfway(Slopes::Ahead("1/10")),
            at_end("1-sqrt(2)/2", "0; -2+sqrt(2)", Slopes::Left),
            at_end("1+sqrt(2)/2", "0; -2-sqrt(2)", Slopes::Left),
        ],
    ),
    method(
        "Kutta 3",
        &["RK3", "Runge-Kutta 3", "Kutta's third order"],
        3,
        ONE_STEP,
        &[stages("0; 1/2; -1 2", "1/6 2/3 1/6")],
    ),
    method(
        "Heun 3",
        &["RK3", "Runge-Kutta 3"],
        3,
        ONE_STEP,
        &[stages("0; 1/3; 0 2/3", "1/4 0 3/4")],
    ),
    method(
        "SSP 3",
        &["SSPRK3", "RK3", "Runge-Kutta 3"],
        3,
        "[shu-osher-1988]",
        &[stages("0; 1; 1/4 1/4", "1/6 1/6 2/3")],
    ),
    method(
        "Bogacki-Shampine 3",
        &["RK23", "Ralston 3", "RK3", "Runge-Kutta 3"],
        3,
        "[bogacki-shampine-1989]",
        &[stages("0; 1/2; 0 3/4", "2/9 1/3 4/9")],
    ),
    method(
        "SDIRK 3",
        &["SDIRK3", "DIRK3"],
        3,
        "[alexander-1977]",
        &[stages(
            "0.43586652150845899941601945119356; \
             0.28206673924577050029199027440322 0.43586652150845899941601945119356; \
             1.2084966491760100703364776840633 -0.64436317068446906975249713525688 \
             0.43586652150845899941601945119356",
            "1.2084966491760100703364776840633 -0.64436317068446906975249713525688 \
             0.43586652150845899941601945119356",
        )],
    ),
    method(
        "SDIRK 3, two stages",
        &["SDIRK3", "SDIRK 3", "DIRK3", "Crouzeix 3", "Norsett 3"],
        3,
        "[hairer-wanner-1996] IV.6, [alexander-1977]",
        &[stages("1/2+sqrt(3)/6; -sqrt(3)/3 1/2+sqrt(3)/6", "1/2 1/2")],
    ),
    method(
        "Radau IIA 3",
        &["Radau3", "Radau IIA, two stages"],
        3,
        STIFF,
        &[stages("5/12 -1/12; 3/4 1/4", "3/4 1/4")],
    ),
    method(
        "classical RK4",
        &["RK4", "Runge-Kutta 4", "Runge-Kutta", "Kutta 4"],
        4,
        ONE_STEP,
        &[stages("0; 1/2; 0 1/2; 0 0 1", "1/6 1/3 1/3 1/6")],
    ),
    method(
        "3/8 rule",
        &["RK4", "Runge-Kutta 4", "RK 3/8"],
        4,
        ONE_STEP,
        &[stages("0; 1/3; -1/3 1; 1 -1 1", "1/8 3/8 3/8 1/8")],
    ),
    method(
        "Runge-Kutta-Fehlberg 4",
        &[
            "Fehlberg 4",
            "RKF4",
            "RKF45",
            "RK45",
            "Runge-Kutta-Fehlberg",
        ],
        4,
        "[hairer-norsett-wanner-1993] II.5",
        &[stages(FEHLBERG, "25/216 0 1408/2565 2197/4104 -1/5 0")],
    ),
    method(
        "Gauss 4",
        &["Gauss-Legendre 4"],
        4,
        STIFF,
        &[stages("1/4 1/4-sqrt(3)/6; 1/4+sqrt(3)/6 1/4", "1/2 1/2")],
    ),
    method(
        "Lobatto IIIC 4",
        &["Lobatto IIIC"],
        4,
        STIFF,
        &[stages(
            "1/6 -1/3 1/6; 1/6 5/12 -1/12; 1/6 2/3 1/6",
            "1/6 2/3 1/6",
        )],
    ),
    method(
        "Runge-Kutta-Fehlberg 5",
        &[
            "Fehlberg 5",
            "RKF5",
            "RKF45",
            "RK45",
            "Runge-Kutta-Fehlberg",
        ],
        5,
        "[hairer-norsett-wanner-1993] II.5",
        &[stages(
            FEHLBERG,
            "16/135 0 6656/12825 28561/56430 -9/50 2/55",
        )],
    ),
    method(
        "Cash-Karp 5",
        &["Cash-Karp", "RKCK", "RK45"],
        5,
        "[cash-karp-1990]",
        &[stages(
            "0; 1/5; 3/40 9/40; 3/10 -9/10 6/5; -11/54 5/2 -70/27 35/27; \
             1631/55296 175/512 575/13824 44275/110592 253/4096",
            "37/378 0 250/621 125/594 0 512/1771",
        )],
    ),
    method(
        "Dormand-Prince 5",
        &["DOPRI5", "Dormand-Prince", "RK45"],
        5,
        "[dormand-prince-1980]",
        &[stages(
            "0; 1/5; 3/40 9/40; 44/45 -56/15 32/9; \
             19372/6561 -25360/2187 64448/6561 -212/729; \
             9017/3168 -355/33 46732/5247 49/176 -5103/18656",
            "35/384 0 500/1113 125/192 -2187/6784 11/84",
        )],
    ),
    method(
        "Radau IIA 5",
        &["Radau", "Radau5", "Radau IIA, three stages"],
        5,
        STIFF,
        &[stages(
            "(88-7*sqrt(6))/360 (296-169*sqrt(6))/1800 (-2+3*sqrt(6))/225; \
             (296+169*sqrt(6))/1800 (88+7*sqrt(6))/360 (-2-3*sqrt(6))/225; \
             (16-sqrt(6))/36 (16+sqrt(6))/36 1/9",
            "(16-sqrt(6))/36 (16+sqrt(6))/36 1/9",
        )],
    ),
    method(
        "Gauss 6",
        &["Gauss-Legendre 6"],
        6,
        STIFF,
        &[stages(
            "5/36 2/9-sqrt(15)/15 5/36-sqrt(15)/30; 5/36+sqrt(15)/24 2/9 5/36-sqrt(15)/24; \
             5/36+sqrt(15)/30 2/9+sqrt(15)/15 5/36",
            "5/18 4/9 5/18",
        )],
    ),
    multistep("BDF 2", &[], 2, &[steps("1/3 -4/3 1", "0 0 2/3")]),
    multistep(
        "BDF 3",
        &[],
        3,
        &[steps("-2/11 9/11 -18/11 1", "0 0 0 6/11")],
    ),
    multistep(
        "BDF 4",
        &[],
        4,
        &[steps("3/25 -16/25 36/25 -48/25 1", "0 0 0 0 12/25")],
    ),
    multistep(
        "BDF 5",
        &[],
        5,
        &[steps(
            "-12/137 75/137 -200/137 300/137 -300/137 1",
            "0 0 0 0 0 60/137",
        )],
    ),
    multistep(
        "BDF 6",
        &[],
        6,
        &[steps(
            "10/147 -72/147 225/147 -400/147 450/147 -360/147 1",
            "0 0 0 0 0 0 60/147",
        )],
    ),
    multistep("Adams-Bashforth 2", &["AB2"], 2, &[steps("0 -1 1", AB2)]),
    multistep("Adams-Bashforth 3", &["AB3"], 3, &[steps("0 0 -1 1", AB3)]),
    multistep(
        "Adams-Bashforth 4",
        &["AB4"],
        4,
        &[steps("0 0 0 -1 1", AB4)],
    ),
    multistep(
        "Adams-Bashforth 5",
        &["AB5"],
        5,
        &[steps("0 0 0 0 -1 1", AB5)],
    ),
    multistep("Adams-Moulton 3", &["AM3"], 3, &[steps("0 -1 1", AM3)]),
    multistep("Adams-Moulton 4", &["AM4"], 4, &[steps("0 0 -1 1", AM4)]),
    multistep("Adams-Moulton 5", &["AM5"], 5, &[steps("0 0 0 -1 1", AM5)]),
    multistep(
        "Adams-Bashforth-Moulton 2",
        &["ABM2", "Adams-Moulton 2", "AM2"],
        2,
        &[predicted(AB2, AM2)],
    ),
    multistep(
        "Adams-Bashforth-Moulton 3",
        &["ABM3", "Adams-Moulton 3", "AM3"],
        3,
        &[predicted(AB3, AM3), predicted(AB2, AM3)],
    ),
    multistep(
        "Adams-Bashforth-Moulton 4",
        &["ABM4", "Adams-Moulton 4", "AM4"],
        4,
        &[predicted(AB4, AM4), predicted(AB3, AM4)],
    ),
    multistep(
        "Adams-Bashforth-Moulton 5",
        &["ABM5", "Adams-Moulton 5", "AM5"],
        5,
        &[predicted(AB5, AM5), predicted(AB4, AM5)],
    ),
];

const AB2: &str = "-1/2 3/2 0";
const AB3: &str = "5/12 -16/12 23/12 0";
const AB4: &str = "-9/24 37/24 -59/24 55/24 0";
const AB5: &str = "251/720 -1274/720 2616/720 -2774/720 1901/720 0";
const AM2: &str = "1/2 1/2";
const AM3: &str = "-1/12 8/12 5/12";
const AM4: &str = "1/24 -5/24 19/24 9/24";
const AM5: &str = "-19/720 106/720 -264/720 646/720 251/720";

const fn steps(alpha: &'static str, beta: &'static str) -> Scheme {
    Multistep { alpha, beta }
}

const fn predicted(predictor: &'static str, corrector: &'static str) -> Scheme {
    Predicted {
        predictor,
        corrector,
    }
}

const fn multistep(
    name: &'static str,
    aliases: &'static [&'static str],
    order: u8,
    schemes: &'static [Scheme],
) -> Method {
    method(name, aliases, order, ADAMS, schemes)
}

impl Method {
    /// How many earlier values a step needs, in the form that needs most.
    pub fn steps_back(&self) -> usize {
        let back = self.schemes.iter().map(Scheme::steps_back);
        back.max().unwrap_or(1)
    }
}

/// All methods that go by a name, without regard to case, blanks and hyphens: the one of
/// that very name first, then those that have it among their other names.
pub fn find_all(name: &str) -> Vec<&'static Method> {
    let wanted = plain(name);
    let own = METHODS.iter().filter(|m| plain(m.name) == wanted);
    let other = METHODS.iter().filter(|method| {
        plain(method.name) != wanted && method.aliases.iter().any(|alias| plain(alias) == wanted)
    });
    own.chain(other).collect()
}

/// The first method that goes by a name.
pub fn find(name: &str) -> Option<&'static Method> {
    find_all(name).first().copied()
}

fn plain(name: &str) -> String {
    let letters = name.chars().filter(|c| c.is_alphanumeric() || *c == '/');
    letters.flat_map(char::to_lowercase).collect()
}

#[cfg(test)]
mod tests {
    use super::*;

    #[test]
    fn names_are_unique_and_every_method_has_a_source() {
        let mut names = Vec::new();
        for method in METHODS {
            names.push(plain(method.name));
            assert!(method.source.starts_with('['), "{}", method.name);
            assert!(!method.schemes.is_empty(), "{}", method.name);
            // A name that several methods share must leave the order in no doubt.
            for alias in method.aliases {
                for other in find_all(alias) {
                    let close = other.order.abs_diff(method.order) <= 2;
                    assert!(close, "{alias}: {} and {}", method.name, other.name);
                }
            }
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
        let second: Vec<&str> = find_all("RK2").iter().map(|m| m.name).collect();
        assert_eq!(second, ["explicit midpoint", "Heun", "Ralston"]);
    }
}
