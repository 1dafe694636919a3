#include "analysis/series/line.h"

#include <cmath>

#include "analysis/series/checks.h"
#include "analysis/series/statistics.h"

namespace loadstair::series {

base::Outcome<Line> fit_line(const TimeSeries& data) {
  if (auto fault = fault_of(data)) return *fault;
  Line line;
  line.count = data.size();
  line.duration_s = data.time_s.back() - data.time_s.front();
  line.middle_s = data.time_s.front() + line.duration_s / 2;

  const double count = static_cast<double>(line.count);
  CompensatedSum time_sum;
  CompensatedSum value_sum;
  for (std::size_t i = 0; i < data.size(); ++i) {
    time_sum.add(data.time_s[i] - line.middle_s);
    value_sum.add(data.value[i]);
  }
  const double mean_time = time_sum.total() / count;
  const double mean_value = value_sum.total() / count;
  CompensatedSum time_squares;
  CompensatedSum products;
  for (std::size_t i = 0; i < data.size(); ++i) {
    const double t = (data.time_s[i] - line.middle_s) - mean_time;
    time_squares.add(t * t);
    products.add(t * (data.value[i] - mean_value));
  }
  if (time_squares.total() > 0) line.slope_per_s = products.total() / time_squares.total();
  line.at_middle = mean_value - line.slope_per_s * mean_time;

  if (line.count > 2) {
    CompensatedSum squares;
    for (const double r : residuals(data, line)) squares.add(r * r);
    line.residual_deviation = std::sqrt(squares.total() / (count - 2));
    if (time_squares.total() > 0)
      line.slope_u_per_s = line.residual_deviation / std::sqrt(time_squares.total());
  }
  return line;
}

std::vector<double> residuals(const TimeSeries& data, const Line& line) {
  std::vector<double> out(data.size());
  for (std::size_t i = 0; i < data.size(); ++i) out[i] = data.value[i] - line.at(data.time_s[i]);
  return out;
}

}  // namespace loadstair::series
