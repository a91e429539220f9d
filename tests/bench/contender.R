# SPDX-License-Identifier: GPL-3.0-or-later
# R's readers of a design table: Rscript contender.R FOLDER usual|fast; ids are made numbers by match().
arguments <- commandArgs(TRUE)
path <- file.path(arguments[1], "design.csv")
start <- proc.time()
if (arguments[2] == "usual") {
    d <- read.csv(path, stringsAsFactors = FALSE)
} else {
    suppressMessages(library(data.table))
    setDTthreads(1)
    d <- fread(path, showProgress = FALSE)
}
i <- match(d$observation, unique(d$observation))
j <- match(d$parameter, unique(d$parameter))
spent <- proc.time() - start
cat(sprintf("read_cpu %.9g\nread_wall %.9g\nrows %d\n", spent[["user.self"]] + spent[["sys.self"]], spent[["elapsed"]], length(i)))
