// series: what a stretch of readings says on its own: mean, deviation, drift, correlation time, Type A of a
// steady window, alignment of channels whose readings fell at different instants. Spans in, plain numbers
// out. Not for meters, sources of error or units (estimate), nor for deciding that a stretch is steady
// (settling).
#pragma once

#include "analysis/series/align.h"          // IWYU pragma: export
#include "analysis/series/correlation.h"    // IWYU pragma: export
#include "analysis/series/line.h"           // IWYU pragma: export
#include "analysis/series/statistics.h"     // IWYU pragma: export
#include "analysis/series/steady_window.h"  // IWYU pragma: export
#include "analysis/series/time_series.h"    // IWYU pragma: export
