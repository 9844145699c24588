% Subspace identification of the control package for Octave (SLICOT routines; Van Overschee & De Moor, 1996): the state of the
% identified Kalman predictor at each origin, run forward. Columns beside the signals are inputs; where there are none, seeded
% noise stands in for one, since the routine does not take outputs alone, and its part is left out of the forecast. The order is
% the one that does best on the second part when fitted on the first; then it is fitted on both.
%
% usage: octave subspace.m CASE_FOLDER OUT n4sid|moen4

pkg load control
1;

function facts = read_facts (file)
  facts = struct ();
  for line = strsplit (strtrim (fileread (file)), "\n")
    parts = strsplit (line{1}, ",");
    facts.(parts{1}) = str2double (parts(2:end));
  end
end

function y = carried (y)
  for c = 1:columns (y)
    last = y(find (! isnan (y(:,c)), 1), c);
    for t = 1:rows (y)
      if (isnan (y(t,c))) y(t,c) = last; end
      last = y(t,c);
    end
  end
end

function model = identify (method, y, u, order)
  record = iddata (y, u);
  [sys, x0, info] = feval (method, record, "n", order, "s", max (2 * order, 10), "noise", "none");
  model = struct ("a", sys.a, "b", sys.b, "c", sys.c, "d", sys.d, "k", info.K);
end

% Future inputs stay at their mean, which is 0 here.
function ahead = forecasts (model, y, u, origins, horizon)
  x = zeros (rows (model.a), 1);
  ahead = zeros (numel (origins) * columns (y), horizon);
  n = 0;
  for t = 1:max (origins) + 1
    e = y(t,:)' - model.c * x - model.d * u(t,:)';
    x = model.a * x + model.b * u(t,:)' + model.k * e;
    if (any (origins == t - 1))
      z = x;
      for h = 1:horizon
        ahead(n * columns (y) + (1:columns (y)), h) = model.c * z;
        z = model.a * z;
      end
      n++;
    end
  end
end

function error = score (ahead, y, origins, horizon)
  error = 0;
  for n = 1:numel (origins)
    for h = 1:horizon
      miss = y(origins(n) + 1 + h, :)' - ahead((n - 1) * columns (y) + (1:columns (y)), h);
      error += sum (miss .^ 2);
    end
  end
end

arguments = argv ();
folder = arguments{1};
facts = read_facts (fullfile (folder, "case.csv"));
all = dlmread (fullfile (folder, "values.csv"), ",", 1, 0);
origins = dlmread (fullfile (folder, "origins.csv"));
fit = facts.fit_ticks;
learn = facts.learn_ticks;
horizon = facts.horizon;
y = carried (all);
middle = mean (y(1:fit,:));
spread = std (y(1:fit,:));
y = (y - middle) ./ spread;
u = y(:, facts.targets+1:end);
y = y(:, 1:facts.targets);
inputs = columns (u);
if (inputs == 0)
  randn ("seed", 1);
  u = randn (rows (y), 1);
end
known = u;
if (inputs == 0) known = zeros (size (u)); end

checked = (learn:max (1, floor ((fit - horizon - learn) / 200)):fit - horizon - 1)';
best = Inf;
order = 0;
for candidate = [1, 2, 3, 4, 6, 8, 12, 16]
  try
    model = identify (arguments{3}, y(1:learn,:), u(1:learn,:), candidate);
    found = score (forecasts (model, y, known, checked, horizon), y, checked, horizon);
    if (found < best) best = found; order = candidate; end
  catch problem
    fprintf (stderr, "order %d: %s\n", candidate, problem.message);
  end
end
if (order == 0) error ("no order could be identified"); end
model = identify (arguments{3}, y(1:fit,:), u(1:fit,:), order);
ahead = forecasts (model, y, known, origins, horizon);
scale = repmat (spread(1:facts.targets)', numel (origins), 1);
shift = repmat (middle(1:facts.targets)', numel (origins), 1);
dlmwrite (arguments{2}, ahead .* scale + shift, "delimiter", ",", "precision", "%.10g");
