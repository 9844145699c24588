# R's forecast package (Hyndman & Khandakar, Journal of Statistical Software 27, 2008), by signal: a model chosen and fitted
# once on the fitting part, then moved to each origin with its parameters as they are.
#
# usage: Rscript forecast.R CASE_FOLDER OUT arima|ets|tbats|double

suppressPackageStartupMessages(library(forecast))

arguments <- commandArgs(trailingOnly = TRUE)
folder <- arguments[1]
out <- arguments[2]
method <- arguments[3]

facts <- strsplit(readLines(file.path(folder, "case.csv")), ",")
fact <- function(name) as.numeric(Filter(function(line) line[1] == name, facts)[[1]][-1])
values <- as.matrix(read.csv(file.path(folder, "values.csv"), na.strings = "NaN"))
origins <- scan(file.path(folder, "origins.csv"), quiet = TRUE) + 1
fitTicks <- fact("fit_ticks")
horizon <- fact("horizon")
targets <- fact("targets")
periods <- Filter(function(p) fitTicks >= 2 * p, fact("periods"))

# Longest period for a season of the model's own: exponential smoothing takes no longer one, and the search for a seasonal ARIMA
# takes minutes beyond; longer periods come in as harmonics there.
LONGEST <- if (method == "arima") 12 else 24
HARMONICS <- 4
short <- length(periods) > 0 && periods[1] <= LONGEST && periods[1] == round(periods[1])
plain <- function(y) ts(y, frequency = if (short) periods[1] else 1)

# Harmonics of the periods, where none of them is short enough to be the season of the model.
waves <- function(from, count) {
  if (short || length(periods) == 0) return(NULL)
  t <- from - 1 + seq_len(count)
  columns <- lapply(periods, function(p) {
    k <- seq_len(min(HARMONICS, floor((p - 1) / 2)))
    cbind(cos(2 * pi * outer(t, k) / p), sin(2 * pi * outer(t, k) / p))
  })
  do.call(cbind, columns)
}

# Gaps closed by the last reading, for the methods that take none.
carried <- function(y) {
  y[1] <- y[!is.na(y)][1]
  for (t in seq_along(y)[-1]) if (is.na(y[t])) y[t] <- y[t - 1]
  y
}

makers <- list(
  arima = function(y) {
    fit <- auto.arima(plain(y), xreg = waves(1, length(y)))
    function(past) {
      moved <- Arima(plain(past), model = fit, xreg = waves(1, length(past)))
      forecast(moved, h = horizon, xreg = waves(length(past) + 1, horizon))$mean
    }
  },
  ets = function(y) {
    fit <- ets(plain(carried(y)))
    function(past) forecast(ets(plain(carried(past)), model = fit, use.initial.values = TRUE), h = horizon, PI = FALSE)$mean
  },
  tbats = function(y) {
    season <- function(y) if (length(periods) > 0) msts(carried(y), seasonal.periods = periods) else ts(carried(y))
    fit <- tbats(season(y), use.parallel = FALSE)
    function(past) forecast(tbats(season(past), model = fit), h = horizon)$mean
  },
  # Two multiplicative seasons (Taylor, Journal of the Operational Research Society 54, 2003).
  double = function(y) {
    fit <- dshw(carried(y), period1 = periods[1], period2 = periods[2], h = horizon)
    function(past) dshw(carried(past), period1 = periods[1], period2 = periods[2], h = horizon, model = fit)$mean
  }
)

lines <- matrix(0, length(origins) * targets, horizon)
for (i in seq_len(targets)) {
  y <- values[, i]
  at <- makers[[method]](y[seq_len(fitTicks)])
  for (n in seq_along(origins)) lines[(n - 1) * targets + i, ] <- as.numeric(at(y[seq_len(origins[n])]))
}
write.table(format(lines, digits = 10, trim = TRUE), out, sep = ",", quote = FALSE, row.names = FALSE, col.names = FALSE)
