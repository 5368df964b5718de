% Trajectories of the cases written by GNU Octave: ode45, ode23, ode23s, ode15s, lsode.
%
% Makes:  runs/octave-*.csv and BUILD/octave.jsonl (their lines of the manifest)
% Run:    octave-cli --no-init-file make_octave.m BUILD runs
%         after   python linear_models.py --write BUILD;  make_all.sh does both
% Needs:  octave
%
% A fixed step is had by InitialStep = MaxStep = h with error settings so wide that no step is refused.  The solvers
% add the time up (compensated), so the last step is cut to reach the end.
1;

function m = load_model (build, slug)
  x = dlmread (fullfile (build, [slug ".model"]));
  n = x(1);
  m.n = n;  m.to = x(2);  at = 2;
  m.A = reshape (x(at+1:at+n*n), n, n).';  at += n*n;
  m.constant = x(at+1:at+n);  at += n;
  m.start = x(at+1:at+n);  at += n;
  m.sine = x(at+1:at+3);  m.column = x(at+4:at+3+n);  at += 3 + n;
  assert (x(at+1) == 0);   % no pulse here
  m.names = strtrim (fileread (fullfile (build, [slug ".names"])));
endfunction

function f = rate (m, t, x)
  f = m.A*x + m.constant + m.column*(m.sine(1)*sin (m.sine(2)*t + m.sine(3)));
endfunction

function save_run (to, slug, tag, t, x, method, order, kind, step, tolerance, in_ladder, twins)
  endings = {"", "-6dec", "-9g", "-6e"};
  forms = {"%.17g", "%.6f", "%.9g", "%.6e"};
  m = load_model (to.build, slug);
  ladder = ["octave-" slug "-" tag];
  if (isempty (tolerance))
    ending = sprintf ("h%g", step);  step_text = sprintf ("%.17g", step);  tolerance = "null";
  else
    ending = ["tol" tolerance];  step_text = "null";
  endif
  order_text = "null";
  if (order)
    order_text = sprintf ("%d", order);
  endif
  for k = 1:ifelse_number (twins, 4, 1)
    name = [ladder "-" ending endings{k} ".csv"];
    f = fopen (fullfile (to.runs, name), "w");
    fprintf (f, "t,%s\n", m.names);
    fprintf (f, [strjoin(repmat (forms(k), 1, m.n + 1), ",") "\n"], [t(:) x].');
    fclose (f);
    ladder_text = "null";
    if (in_ladder && k == 1)
      ladder_text = ["\"" ladder "\""];
    endif
    fprintf (to.manifest, ["{\"file\": \"%s\", \"case\": \"outside/%s\", \"library\": \"GNU Octave\", " ...
             "\"library_version\": \"%s\", \"method\": \"%s\", \"order\": %s, \"kind\": \"%s\", \"step\": %s, " ...
             "\"tolerance\": %s, \"digits_format\": \"%s\", \"ladder\": %s}\n"], name, slug, version (), method, ...
             order_text, kind, step_text, tolerance, forms{k}, ladder_text);
  endfor
endfunction

function n = ifelse_number (condition, a, b)
  n = b;
  if (condition)
    n = a;
  endif
endfunction

function fixed (to, slug, solver, order, coarsest, twin)
  m = load_model (to.build, slug);
  for k = 0:3
    h = coarsest / 2^k;
    options = odeset ("RelTol", 1e9, "AbsTol", 1e9, "InitialStep", h, "MaxStep", h);
    if (strcmp (solver, "ode23s"))
      options = odeset (options, "Jacobian", m.A);
    endif
    [t, x] = feval (solver, @(t, x) rate (m, t, x), [0 m.to], m.start, options);
    save_run (to, slug, solver, t, x, solver, order, "fixed-step", h, "", true, k == twin);
  endfor
endfunction

function tolerances (to, slug, solver, settings, every)
  m = load_model (to.build, slug);
  for k = 1:numel (settings)
    options = odeset ("RelTol", str2double (settings{k}), "AbsTol", str2double (settings{k}));
    if (any (strcmp (solver, {"ode23s", "ode15s"})))
      options = odeset (options, "Jacobian", m.A);
    endif
    span = [0 m.to];  tag = [solver "-accepted"];  kind = "accepted-steps";
    if (every)
      span = (0:round (m.to/every))*every;  span(end) = m.to;  tag = [solver "-every"];  kind = "interpolated";
    endif
    [t, x] = feval (solver, @(t, x) rate (m, t, x), span, m.start, options);
    save_run (to, slug, tag, t, x, solver, 0, kind, 0, settings{k}, numel (settings) > 2, false);
  endfor
endfunction

function with_lsode (to, slug, method, settings, every)
  m = load_model (to.build, slug);
  t = (0:round (m.to/every))*every;  t(end) = m.to;
  for k = 1:numel (settings)
    lsode_options ("integration method", method);
    lsode_options ("relative tolerance", str2double (settings{k}));
    lsode_options ("absolute tolerance", str2double (settings{k}));
    [x, state, message] = lsode (@(x, t) rate (m, t, x), m.start, t);
    assert (state == 2, message);
    save_run (to, slug, ["lsode_" method], t, x, ["lsode, integration method " method], 0, "interpolated", 0, ...
              settings{k}, numel (settings) > 2, false);
  endfor
endfunction

to.build = argv (){end-1};
to.runs = argv (){end};
to.manifest = fopen (fullfile (to.build, "octave.jsonl"), "w");
four = {"1e-4", "1e-6", "1e-8", "1e-10"};
fixed (to, "damped-oscillator", "ode45", 5, 0.2, 1);
fixed (to, "oscillator", "ode23", 3, 0.2, -1);
fixed (to, "forced-lag", "ode23s", 2, 0.2, -1);
tolerances (to, "tank-cascade", "ode45", four, 0);
tolerances (to, "stiff-pair", "ode15s", {"1e-4"}, 0);   % ode15s gives up on its first step at tighter settings
tolerances (to, "damped-oscillator", "ode15s", {"1e-4", "1e-6"}, 0);
tolerances (to, "stiff-pair", "ode23s", {"1e-4"}, 0);
tolerances (to, "forced-lag", "ode45", {"1e-4", "1e-6", "1e-8"}, 0.05);
with_lsode (to, "stiff-pair", "stiff", four, 0.05);
with_lsode (to, "oscillator", "adams", {"1e-6"}, 0.05);
fclose (to.manifest);
