#!/bin/sh
# What R makes of the tables: read.csv gives numbers as numbers and NA for empty cells.
set -u
folder=$(mktemp -d)
trap 'rm -rf "$folder"' EXIT
cd "$folder" || exit 2
"$THEATRE" --into . --minutes 20 >/dev/null 2>&1
"$INCISURA" start c --rater KM 2>/dev/null
"$INCISURA" attach c S-204-monitor.edf S-204-skin.edf 2>/dev/null
"$INCISURA" mark c incision --at +00:10:00 >/dev/null
"$INCISURA" mark c incision --at +00:00:02 >/dev/null
printf '[events]\ncodes = incision\n[window]\nbefore = 10\nafter = 20\nrate = 4\nvalid = 0.1\n[signals]\nhr = heart-rate\neda = channel "EDA"\n' >r.ini
"$INCISURA" export c --recipe r.ini --into out 2>/dev/null
Rscript --vanilla - <<'R'
ok <- function(good, what) cat(if (isTRUE(good)) "ok" else "not ok", "R:", what, "\n")
long <- read.csv("out/windows-long.csv")
wide <- read.csv("out/windows-wide.csv")
features <- read.csv("out/features.csv")
dictionary <- read.csv("out/dictionary.csv")
ok(is.numeric(long$value) && is.numeric(long$t_s) && is.numeric(long$onset_s), "long: numbers are numbers")
ok(is.integer(long$mark) && is.integer(long$valid), "long: marks and flags are integers")
ok(all(is.na(long$value) == (long$valid == 0)), "long: NA exactly where not valid")
ok(any(is.na(long$value)) && any(!is.na(long$value)), "long: both occur")
ok(is.numeric(wide$hr) && is.numeric(wide$eda) && nrow(wide) == 240, "wide: numbers, 2 x 120 rows")
m <- aggregate(value ~ mark + signal, data = subset(long, t_s >= 0), FUN = mean)
f <- merge(m, features, by = c("mark", "signal"))
ok(nrow(f) >= 3 && all(abs(f$value - f$mean) < 1e-4 * abs(f$mean)), "features equal R's means")
ok(is.character(dictionary$method) && nrow(dictionary) > 20, "dictionary reads")
R
