# The same fit by general-purpose packages, for the bench to print beside ours: Rscript reference.R data.csv "model" rule
# Prints CPU seconds of the fit alone (with the degrees of freedom when a rule is named), on one thread.
arguments <- commandArgs(trailingOnly = TRUE)
model <- arguments[2]
rule <- if (length(arguments) > 2) arguments[3] else ""
rows <- read.csv(arguments[1])
rows$subject <- factor(rows$subject)
rows$visit <- factor(rows$visit)
suppressMessages({
	library(nlme)
	library(lme4)
})
mixed <- list(
	"level" = y ~ time * arm + (1 | subject),
	"level and slope" = y ~ time * arm + (time | subject),
	"level + visit" = y ~ time * arm + (1 | subject) + (1 | visit),
	"level and slope + visit" = y ~ time * arm + (time | subject) + (1 | visit)
)
fit <- if (rule == "kenward-roger" && !is.null(mixed[[model]])) {
	suppressMessages(library(lmerTest))
	function() coef(summary(lmerTest::lmer(mixed[[model]], rows), ddf = "Kenward-Roger"))
} else if (!is.null(mixed[[model]])) {
	function() lme4::lmer(mixed[[model]], rows)
} else if (model == "serial") {
	function() gls(y ~ time * arm, rows, correlation = corCAR1(form = ~ time | subject))
} else if (model == "level + serial") {
	function() lme(y ~ time * arm, rows, random = ~ 1 | subject, correlation = corCAR1(form = ~ time | subject))
} else if (model == "unstructured") {
	function() gls(
		y ~ visit * arm, rows,
		correlation = corSymm(form = ~ as.integer(visit) | subject),
		weights = varIdent(form = ~ 1 | visit)
	)
} else stop("no package at hand fits ", model)
used <- system.time(fit())
cat(used[["user.self"]] + used[["sys.self"]], "\n")
