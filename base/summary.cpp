#include "base/summary.hpp"

#include <algorithm>
#include <cmath>
#include <limits>

namespace jigwright {

namespace {

/// A sum that carries what rounding drops (Neumaier, ZAMM 54 (1974) 39).
class Sum {
 public:
  void add(double x) {
    const double next = sum_ + x;
    slip_ += std::abs(sum_) >= std::abs(x) ? (sum_ - next) + x : (x - next) + sum_;
    sum_ = next;
  }
  double value() const { return sum_ + slip_; }

 private:
  double sum_{0};
  double slip_{0};
};

}  // namespace

Summary summarize(std::span<const double> values) {
  Summary s;
  s.n = values.size();
  if (s.n == 0) return s;
  const auto n = static_cast<double>(s.n);
  const double first = values[0];
  Sum sum;
  for (const double v : values) sum.add(v - first);
  s.mean = first + sum.value() / n;
  if (s.n < 2) return s;
  Sum squares;
  Sum slip;
  for (const double v : values) {
    const double d = v - s.mean;
    squares.add(d * d);
    slip.add(d);
  }
  s.mean += slip.value() / n;
  s.sd = std::sqrt((squares.value() - slip.value() * slip.value() / n) / (n - 1));
  return s;
}

double quantile(std::span<const double> sorted, double p) {
  if (sorted.empty()) return std::numeric_limits<double>::quiet_NaN();
  const double at = static_cast<double>(sorted.size() - 1) * std::clamp(p, 0.0, 1.0);
  const auto below = static_cast<std::size_t>(at);
  const double part = at - static_cast<double>(below);
  if (!(part > 0)) return sorted[below];
  return sorted[below] + part * (sorted[below + 1] - sorted[below]);
}

std::optional<double> lag1(std::span<const double> values) {
  const Summary s = summarize(values);
  if (s.n < 2 || !(s.sd > 0)) return std::nullopt;
  Sum top;
  Sum bottom;
  for (std::size_t i = 0; i < values.size(); ++i) {
    const double d = values[i] - s.mean;
    bottom.add(d * d);
    if (i + 1 < values.size()) top.add(d * (values[i + 1] - s.mean));
  }
  return top.value() / bottom.value();
}

std::optional<Line> fit_line(std::span<const double> x, std::span<const double> y) {
  if (x.size() != y.size() || x.size() < 2) return std::nullopt;
  const double mean_x = summarize(x).mean;
  const double mean_y = summarize(y).mean;
  Sum xx;
  Sum xy;
  for (std::size_t i = 0; i < x.size(); ++i) {
    const double d = x[i] - mean_x;
    xx.add(d * d);
    xy.add(d * (y[i] - mean_y));
  }
  const double sxx = xx.value();
  if (!(sxx > 0)) return std::nullopt;
  Line line;
  line.slope = xy.value() / sxx;
  line.intercept = mean_y - line.slope * mean_x;
  Sum squares;
  for (std::size_t i = 0; i < x.size(); ++i) {
    const double r = (y[i] - mean_y) - line.slope * (x[i] - mean_x);
    squares.add(r * r);
    if (std::abs(r) > std::abs(line.worst_residual)) line.worst_residual = r;
  }
  if (x.size() > 2) {
    line.residual_sd = std::sqrt(squares.value() / static_cast<double>(x.size() - 2));
    line.u_slope = line.residual_sd / std::sqrt(sxx);
  }
  return line;
}

}  // namespace jigwright
