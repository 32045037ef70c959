% SPDX-License-Identifier: GPL-3.0-or-later
% Margins of the loops in a text file by Octave's control package, for tests/external/loops/octave_margin_test.cpp.
% Usage: octave --no-gui --quiet octave_margin.m loops.txt
% Each line: interval (0 for continuous), number of numerator coefficients, they, number of denominator coefficients, they; highest
% power first. Printed per line: gain margin (ratio), phase margin (degrees), their frequencies (rad/s), stable (0/1),
% sensitivity peak (NaN where not stable).
pkg load control
file = fopen(argv(){1});
while ischar(line = fgetl(file))
  values = sscanf(line, "%f")';
  interval = values(1);
  n = values(2);
  numerator = values(3:2 + n);
  denominator = values(4 + n:end);
  if interval > 0
    loop = tf(numerator, denominator, interval);
  else
    loop = tf(numerator, denominator);
  end
  [gain, phase, gain_frequency, phase_frequency] = margin(loop);
  closed = roots([zeros(1, numel(denominator) - numel(numerator)), numerator] + denominator);
  if interval > 0
    stable = all(abs(closed) < 1);
  else
    stable = all(real(closed) < 0);
  end
  peak = NaN;
  if stable
    peak = norm(feedback(tf(1), loop), Inf, 1e-7);  % sensitivity() stops at 1 %
  end
  printf("%.12g %.12g %.12g %.12g %d %.12g\n", gain, phase, gain_frequency, phase_frequency, stable, peak);
end
fclose(file);
