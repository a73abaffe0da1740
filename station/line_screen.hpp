// The line's screen on a terminal: one large word with a shape, what it is about, what to do next. Elsewhere a line for
// each change. Colour is the third sign, after word and shape, and only on a terminal. One thread.
#pragma once
#include <cstdio>
#include <memory>
#include <string>
#include <vector>

#include "station/line_session.hpp"

namespace jigwright {

class LineScreen {
 public:
  virtual ~LineScreen() = default;
  virtual void show(const LineView& view) = 0;
};

std::unique_ptr<LineScreen> make_terminal_screen(std::FILE* out);
std::unique_ptr<LineScreen> make_plain_screen(std::FILE* out);

/// Seven lines of text: the shape, then the word in letters five high.
std::vector<std::string> large(const std::string& word, Shape shape);

}  // namespace jigwright
