//! The published sources, each with the tag that doc comments and the catalogue of methods
//! cite.
//!
//! All of these are cited from memory of the works; numbers taken from them are tested
//! against recomputed ones.

/// Tag and source, in the order of the tags.
pub const SOURCES: &[(&str, &str)] = &[
    (
        "alexander-1977",
        "R. Alexander, Diagonally implicit Runge-Kutta methods for stiff O.D.E.'s, SIAM J. Numer. Anal. 14 (1977) 1006",
    ),
    (
        "bank-1985",
        "R. E. Bank et al., Transient simulation of silicon devices and circuits, IEEE Trans. Electron Devices 32 (1985) 1992",
    ),
    (
        "bogacki-shampine-1989",
        "P. Bogacki, L. F. Shampine, A 3(2) pair of Runge-Kutta formulas, Appl. Math. Lett. 2 (1989) 321",
    ),
    (
        "cash-karp-1990",
        "J. R. Cash, A. H. Karp, A variable order Runge-Kutta method for initial value problems with rapidly varying right-hand sides, ACM Trans. Math. Softw. 16 (1990) 201",
    ),
    (
        "celik-2008",
        "I. Celik et al., Procedure for estimation and reporting of uncertainty due to discretization in CFD applications, ASME J. Fluids Eng. 130 (2008) 078001",
    ),
    (
        "dekker-1971",
        "T. J. Dekker, A floating-point technique for extending the available precision, Numer. Math. 18 (1971) 224",
    ),
    (
        "dormand-prince-1980",
        "J. R. Dormand, P. J. Prince, A family of embedded Runge-Kutta formulae, J. Comput. Appl. Math. 6 (1980) 19",
    ),
    (
        "hairer-norsett-wanner-1993",
        "E. Hairer, S. P. Norsett, G. Wanner, Solving Ordinary Differential Equations I, 2nd edition, Springer 1993",
    ),
    (
        "hairer-wanner-1996",
        "E. Hairer, G. Wanner, Solving Ordinary Differential Equations II, 2nd edition, Springer 1996",
    ),
    (
        "hida-li-bailey-2001",
        "Y. Hida, X. S. Li, D. H. Bailey, Algorithms for quad-double precision floating point arithmetic, 15th IEEE Symposium on Computer Arithmetic, 2001",
    ),
    (
        "higham-2005",
        "N. J. Higham, The scaling and squaring method for the matrix exponential revisited, SIAM J. Matrix Anal. Appl. 26 (2005) 1179",
    ),
    (
        "hochbruck-ostermann-2010",
        "M. Hochbruck, A. Ostermann, Exponential integrators, Acta Numerica 19 (2010) 209",
    ),
    (
        "hosea-shampine-1996",
        "M. E. Hosea, L. F. Shampine, Analysis and implementation of TR-BDF2, Appl. Numer. Math. 20 (1996) 21",
    ),
    (
        "jcgm-106",
        "JCGM 106:2012, Evaluation of measurement data: the role of measurement uncertainty in conformity assessment",
    ),
    (
        "joldes-2017",
        "M. Joldes, J.-M. Muller, V. Popescu, Tight and rigorous error bounds for basic building blocks of double-word arithmetic, ACM Trans. Math. Softw. 44 (2017) 15",
    ),
    (
        "moler-van-loan-2003",
        "C. Moler, C. Van Loan, Nineteen dubious ways to compute the exponential of a matrix, twenty-five years later, SIAM Review 45 (2003) 3",
    ),
    (
        "ralston-1962",
        "A. Ralston, Runge-Kutta methods with minimum error bounds, Math. Comp. 16 (1962) 431",
    ),
    (
        "roache-1998",
        "P. J. Roache, Verification and Validation in Computational Science and Engineering, Hermosa 1998",
    ),
    (
        "shampine-reichelt-1997",
        "L. F. Shampine, M. W. Reichelt, The MATLAB ODE suite, SIAM J. Sci. Comput. 18 (1997) 1",
    ),
    (
        "shu-osher-1988",
        "C.-W. Shu, S. Osher, Efficient implementation of essentially non-oscillatory shock-capturing schemes, J. Comput. Phys. 77 (1988) 439",
    ),
    (
        "van-loan-1978",
        "C. F. Van Loan, Computing integrals involving the matrix exponential, IEEE Trans. Autom. Control 23 (1978) 395",
    ),
    (
        "verwer-1999",
        "J. G. Verwer et al., A second-order Rosenbrock method applied to photochemical dispersion problems, SIAM J. Sci. Comput. 20 (1999) 1456",
    ),
];

/// The source of a tag.
pub fn source(tag: &str) -> Option<&'static str> {
    let found = SOURCES.iter().find(|(known, _)| *known == tag);
    found.map(|&(_, source)| source)
}
