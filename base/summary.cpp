#include "base/summary.hpp"

#include <cmath>

namespace jigwright {

Summary summarize(std::span<const double> values) {
  Summary s;
  s.n = values.size();
  if (s.n == 0) return s;
  const double first = values[0];
  double sum = 0;
  for (const double v : values) sum += v - first;
  s.mean = first + sum / static_cast<double>(s.n);
  if (s.n < 2) return s;
  double squares = 0;
  double slip = 0;
  for (const double v : values) {
    const double d = v - s.mean;
    squares += d * d;
    slip += d;
  }
  const auto n = static_cast<double>(s.n);
  s.mean += slip / n;
  s.sd = std::sqrt((squares - slip * slip / n) / (n - 1));
  return s;
}

std::optional<double> lag1(std::span<const double> values) {
  const Summary s = summarize(values);
  if (s.n < 2 || !(s.sd > 0)) return std::nullopt;
  double top = 0;
  double bottom = 0;
  for (std::size_t i = 0; i < values.size(); ++i) {
    const double d = values[i] - s.mean;
    bottom += d * d;
    if (i + 1 < values.size()) top += d * (values[i + 1] - s.mean);
  }
  return top / bottom;
}

std::optional<Line> fit_line(std::span<const double> x, std::span<const double> y) {
  if (x.size() != y.size() || x.size() < 2) return std::nullopt;
  const double mean_x = summarize(x).mean;
  const double mean_y = summarize(y).mean;
  double sxx = 0;
  double sxy = 0;
  for (std::size_t i = 0; i < x.size(); ++i) {
    const double d = x[i] - mean_x;
    sxx += d * d;
    sxy += d * (y[i] - mean_y);
  }
  if (!(sxx > 0)) return std::nullopt;
  Line line;
  line.slope = sxy / sxx;
  line.intercept = mean_y - line.slope * mean_x;
  double squares = 0;
  for (std::size_t i = 0; i < x.size(); ++i) {
    const double r = (y[i] - mean_y) - line.slope * (x[i] - mean_x);
    squares += r * r;
    if (std::abs(r) > std::abs(line.worst_residual)) line.worst_residual = r;
  }
  if (x.size() > 2) {
    line.residual_sd = std::sqrt(squares / static_cast<double>(x.size() - 2));
    line.u_slope = line.residual_sd / std::sqrt(sxx);
  }
  return line;
}

}  // namespace jigwright
