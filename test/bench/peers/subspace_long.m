% Subspace identification of a long history with the control package for Octave (SLICOT routines, its quickest algorithm; Van
% Overschee & De Moor, 1996). The routine does not take outputs alone, so seeded noise stands in for an input. Gaps are bridged by lines.
%
% usage: octave subspace_long.m ROWS.npy HEADER_BYTES SIGNALS BLOCK_ROWS ORDER MODEL_OUT.csv

pkg load control
arguments = argv ();
file = fopen (arguments{1}, "rb");
fseek (file, str2double (arguments{2}), "bof");
y = fread (file, [str2double(arguments{3}), Inf], "double")';
fclose (file);
ticks = (1:rows (y))';
for c = 1:columns (y)
  gone = isnan (y(:,c));
  if (any (gone)) y(gone,c) = interp1 (ticks(! gone), y(! gone,c), ticks(gone), "linear", "extrap"); end
end
y = (y - mean (y)) ./ std (y);
randn ("seed", 1);
record = iddata (y, randn (rows (y), 1));
sys = n4sid (record, "n", str2double (arguments{5}), "s", str2double (arguments{4}), "noise", "none");
dlmwrite (arguments{6}, [sys.a; sys.c], "delimiter", ",", "precision", "%.10g");
