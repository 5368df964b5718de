% The same trajectory by GNU Octave: octave-cli make_formats.m, in this folder.
data = dlmread('euler.csv', ',', 1, 0);
t = data(:, 1); body = data(:, 2); flux = data(:, 3);
n = int32(0:rows(t) - 1)';
y = data(:, 2:3);
note = 'Euler';
dt = 0.08;
save('-v6', 'octave6.mat', 't', 'body', 'flux', 'n', 'y', 'note', 'dt');
save('-v7', 'octave7.mat', 't', 'body', 'flux', 'n', 'y', 'note', 'dt');
run.t = t'; run.body = body; run.flux = single(flux); run.inner.a = 1;
save('-v7', 'octave_struct.mat', 'run', 'dt');
save('-hdf5', 'octave.h5', 't', 'body', 'flux', 'y', 'dt');
disp(OCTAVE_VERSION());
