# Trajectories of the cases written by the R package deSolve: fixed steps and rows asked for at given times.
#
# Makes:  runs/desolve-*.csv and BUILD/desolve.jsonl (their lines of the manifest)
# Run:    Rscript --vanilla make_desolve.R BUILD runs
#         after   python linear_models.py --write BUILD;  make_all.sh does both
# Needs:  r-base-core, r-cran-desolve
#
# Fixed steps: rk() with `times` on the grid and hini = h; a method with an error estimate is held to the step by
# hmin = hmax = h and error settings so wide that no step is refused.  Elsewhere hmax is the window: the bound on the step
# is by default the spacing of the rows, so that with rows close together the error setting would decide nothing.
suppressMessages(library(deSolve))
args <- commandArgs(trailingOnly = TRUE)
build <- args[1]
runs <- args[2]
manifest <- file(file.path(build, "desolve.jsonl"), "w")
forms <- c("%.17g", "%.6f", "%.9g", "%.6e")
endings <- c("", "-6dec", "-9g", "-6e")

load_model <- function(slug) {
  x <- scan(file.path(build, paste0(slug, ".model")), quiet = TRUE)
  n <- x[1]
  at <- 2
  some <- function(k) { at <<- at + k; x[(at - k + 1):at] }
  m <- list(n = n, to = x[2])
  m$A <- matrix(some(n * n), n, n, byrow = TRUE)
  m$constant <- some(n)
  start <- some(n)
  m$sine <- some(3)
  m$column <- some(n)
  stopifnot(some(1) == 0)                       # no pulse here
  m$names <- readLines(file.path(build, paste0(slug, ".names")))
  names(start) <- strsplit(m$names, ",")[[1]]
  m$start <- start
  m$rate <- function(t, x, unused)
    list(drop(m$A %*% x) + m$constant + m$column * (m$sine[1] * sin(m$sine[2] * t + m$sine[3])))
  m
}

grid <- function(m, h) {
  t <- (0:round(m$to / h)) * h
  t[length(t)] <- m$to
  t
}

save_run <- function(slug, tag, m, rows, method, order, kind, step, tolerance, in_ladder, twins) {
  rows <- unclass(rows)
  ladder <- paste0("desolve-", slug, "-", tag)
  ending <- if (is.null(tolerance)) sprintf("h%g", step) else paste0("tol", tolerance)
  for (k in if (twins) 1:4 else 1) {
    name <- paste0(ladder, "-", ending, endings[k], ".csv")
    lines <- apply(rows, 1, function(r) paste(sprintf(forms[k], r), collapse = ","))
    writeLines(c(paste0("t,", m$names), lines), file.path(runs, name))
    cat(sprintf(paste0('{"file": "%s", "case": "outside/%s", "library": "deSolve", "library_version": "%s", ',
                       '"method": "%s", "order": %s, "kind": "%s", "step": %s, "tolerance": %s, ',
                       '"digits_format": "%s", "ladder": %s}\n'),
                name, slug, as.character(packageVersion("deSolve")), method, if (order > 0) order else "null", kind,
                if (is.null(tolerance)) sprintf("%.17g", step) else "null", if (is.null(tolerance)) "null" else tolerance,
                forms[k], if (in_ladder && k == 1) paste0('"', ladder, '"') else "null"), file = manifest)
  }
}

fixed <- function(slug, method, order, coarsest, twin = -1) {
  m <- load_model(slug)
  for (k in 0:3) {
    h <- coarsest / 2^k
    rows <- if (rkMethod(method)$varstep)
      rk(m$start, grid(m, h), m$rate, NULL, method = method, rtol = 1e9, atol = 1e9, hini = h, hmin = h, hmax = h)
    else rk(m$start, grid(m, h), m$rate, NULL, method = method, hini = h)
    save_run(slug, method, m, rows, sprintf("rk(method = '%s')", method), order, "fixed-step", h, NULL, TRUE, k == twin)
  }
}

tolerances <- function(slug, method, settings, every = 0.05, twin = "") {
  m <- load_model(slug)
  for (s in settings) {
    rows <- ode(m$start, grid(m, every), m$rate, NULL, method = method, rtol = as.numeric(s), atol = as.numeric(s),
                hmax = m$to)
    save_run(slug, paste0(method, "-every"), m, rows, sprintf("ode(method = '%s')", method), 0, "interpolated", NULL, s,
             length(settings) > 2, s == twin)
  }
}

four <- c("1e-4", "1e-6", "1e-8", "1e-10")
fixed("forced-lag", "euler", 1, 0.2)
fixed("forced-lag", "rk2", 2, 0.2)
fixed("tank-cascade", "rk4", 4, 0.2, twin = 1)
fixed("oscillator", "rk23bs", 3, 0.2)
fixed("decay", "irk3r", 3, 0.2)
fixed("oscillator", "irk5r", 5, 0.5)
tolerances("stiff-pair", "lsoda", four, twin = "1e-6")
tolerances("oscillator", "vode", c("1e-6"))
tolerances("stiff-pair", "daspk", c("1e-6"))
tolerances("stiff-pair", "radau", c("1e-6", "1e-8"))
tolerances("forced-lag", "ode45", c("1e-4", "1e-6", "1e-8"))
close(manifest)
