# Time of a whole fit (estimate, smooth, forecast 12 steps) with StructTS of base R, one structure a file of series.
# Usage: Rscript timing.R folder count; prints `file,seconds per fit`.
arguments <- commandArgs(trailingOnly = TRUE)
count <- as.integer(arguments[2])
types <- list(c("local_level", "level", 1), c("local_linear", "trend", 1), c("dummy_season", "BSM", 12))
for (type in types) {
  series <- as.matrix(read.csv(file.path(arguments[1], paste0(type[1], ".csv")), header = FALSE))
  many <- min(count, nrow(series))
  begin <- proc.time()[["elapsed"]]
  for (i in seq_len(many)) {
    y <- ts(series[i, ], frequency = as.integer(type[3]))
    fit <- StructTS(y, type = type[2])
    smoothed <- tsSmooth(fit)
    ahead <- predict(fit, n.ahead = 12)
  }
  cat(type[1], ",", (proc.time()[["elapsed"]] - begin) / many, "\n", sep = "")
}
