library(curl)
library(jsonlite)

url <- Sys.getenv("LADDERBAND_URL", "http://127.0.0.1:8080")

ask <- function(path, body) {
  handle <- new_handle(postfields = toJSON(body, auto_unbox = TRUE, digits = NA))
  headers <- list("Content-Type" = "application/json", "Prefer" = "wait=60")
  key <- Sys.getenv("LADDERBAND_KEY")
  if (nzchar(key)) headers[["Authorization"]] <- paste("Bearer", key)
  handle_setheaders(handle, .list = headers)
  answer <- curl_fetch_memory(paste0(url, path), handle = handle)
  if (answer$status_code >= 400) stop(rawToChar(answer$content))
  answer$content
}

mode <- list(wavenumber_initial_cm1 = 992, wavenumber_final_cm1 = 923, huang_rhys = 1.25)
transition <- list(origin_cm1 = 26650, modes = list(mode))
answer <- fromJSON(rawToChar(ask("/v1/lines", c(transition, tolerance = 0.01))))
lines <- answer$lines
cat(sprintf("%.1f %.6f %s\n", lines$position_cm1, lines$intensity, lines$assignment), sep = "")
cat("missing at most", format(answer$completeness$missing_at_most, digits = 17), "\n")

axis <- list(unit = "cm-1", start = 26000, stop = 31500, points = 551)
band <- c(transition, list(axis = axis, line_shape = list(fwhm_cm1 = 200)))
writeBin(ask("/v1/bands?format=svg&title=Band", band), "band.svg")
