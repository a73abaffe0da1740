#include "base/nearest.hpp"

#include <algorithm>
#include <cctype>
#include <vector>

namespace jigwright {

int edit_distance(std::string_view a, std::string_view b) {
  auto low = [](char c) { return std::tolower(static_cast<unsigned char>(c)); };
  const std::size_t rows = a.size() + 1;
  const std::size_t columns = b.size() + 1;
  std::vector<int> d(rows * columns);
  auto at = [&](std::size_t i, std::size_t j) -> int& { return d[i * columns + j]; };
  for (std::size_t i = 0; i < rows; ++i) at(i, 0) = static_cast<int>(i);
  for (std::size_t j = 0; j < columns; ++j) at(0, j) = static_cast<int>(j);
  for (std::size_t i = 1; i < rows; ++i) {
    for (std::size_t j = 1; j < columns; ++j) {
      const int cost = low(a[i - 1]) == low(b[j - 1]) ? 0 : 1;
      at(i, j) = std::min({at(i - 1, j) + 1, at(i, j - 1) + 1, at(i - 1, j - 1) + cost});
      if (i > 1 && j > 1 && low(a[i - 1]) == low(b[j - 2]) && low(a[i - 2]) == low(b[j - 1]))
        at(i, j) = std::min(at(i, j), at(i - 2, j - 2) + 1);
    }
  }
  return d.back();
}

namespace {

std::string without_spaces(std::string_view text) {
  std::string out(text);
  std::erase(out, ' ');
  return out;
}

}  // namespace

std::optional<std::string> nearest(std::string_view word, std::span<const std::string> known) {
  if (word.size() > 80) return std::nullopt;
  const std::string* best = nullptr;
  int least = 0;
  for (const std::string& k : known) {
    if (k.size() > 80) continue;
    const bool same_but_spaces = edit_distance(without_spaces(word), without_spaces(k)) == 0;
    const int distance = same_but_spaces ? 0 : edit_distance(word, k);
    if (best == nullptr || distance < least) {
      best = &k;
      least = distance;
    }
  }
  if (best == nullptr) return std::nullopt;
  const int allowed = std::max<int>(1, static_cast<int>(std::max(word.size(), best->size()) / 3));
  if (least > allowed) return std::nullopt;
  return *best;
}

std::string listed(std::span<const std::string> words) {
  if (words.empty()) return "none";
  std::string out;
  for (const std::string& w : words) out += (out.empty() ? "" : ", ") + w;
  return out;
}

}  // namespace jigwright
