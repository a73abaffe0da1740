#include "station/line_screen.hpp"

#include <fmt/format.h>
#include <sys/ioctl.h>
#include <termios.h>
#include <unistd.h>

#include <algorithm>
#include <array>
#include <cstdlib>
#include <map>

#include "base/source.hpp"

namespace jigwright {
namespace {

constexpr std::size_t rows = 7;
using Picture = std::array<const char*, rows>;

/// Letters of seven rows; what is not here is written small.
const std::map<std::string, Picture>& letters() {
  static const std::map<std::string, Picture> all = {
      {"G", {" ##### ", "##   ##", "##     ", "##  ###", "##   ##", "##   ##", " ##### "}},
      {"O", {" ##### ", "##   ##", "##   ##", "##   ##", "##   ##", "##   ##", " ##### "}},
      {"N", {"##   ##", "###  ##", "#### ##", "## ####", "##  ###", "##   ##", "##   ##"}},
      {"V", {"##   ##", "##   ##", "##   ##", "##   ##", " ## ## ", "  ###  ", "   #   "}},
      {"I", {"####", " ## ", " ## ", " ## ", " ## ", " ## ", "####"}},
      {"D", {"###### ", "##   ##", "##   ##", "##   ##", "##   ##", "##   ##", "###### "}},
      {"-", {"     ", "     ", "     ", "#####", "     ", "     ", "     "}},
      {"S", {" ##### ", "##   ##", "##     ", " ##### ", "     ##", "##   ##", " ##### "}},
      {"T", {"########", "   ##   ", "   ##   ", "   ##   ", "   ##   ", "   ##   ", "   ##   "}},
      {"P", {"###### ", "##   ##", "##   ##", "###### ", "##     ", "##     ", "##     "}},
  };
  return all;
}

const Picture* shape_of(Shape shape) {
  static constexpr Picture disc = {"   #######   ", " ########### ", "#############", "#############",
                                   "#############", " ########### ", "   #######   "};
  static constexpr Picture square = {"#############", "#############", "#############", "#############",
                                     "#############", "#############", "#############"};
  static constexpr Picture triangle = {"      #      ", "     ###     ", "    #####    ", "   #######   ",
                                       "  #########  ", " ########### ", "#############"};
  static constexpr Picture bar = {"             ", "             ", "#############", "#############",
                                  "#############", "             ", "             "};
  switch (shape) {
    case Shape::disc:
      return &disc;
    case Shape::square:
      return &square;
    case Shape::triangle:
      return &triangle;
    case Shape::bar:
      return &bar;
    case Shape::none:
      return nullptr;
  }
  return nullptr;
}

/// "#" becomes a full block.
std::string blocks(const std::string& row) {
  std::string out;
  for (const char c : row) out += c == '#' ? "\u2588" : std::string(1, c);
  return out;
}

bool has_letters(const std::string& word) {
  return !word.empty() &&
         std::all_of(word.begin(), word.end(), [](char c) { return letters().contains(std::string(1, c)); });
}

const char* colour_of(Shape shape) {
  switch (shape) {
    case Shape::disc:
      return "\033[32m";
    case Shape::square:
      return "\033[31m";
    case Shape::triangle:
      return "\033[33m";
    default:
      return "";
  }
}

class TerminalScreen final : public LineScreen {
 public:
  explicit TerminalScreen(std::FILE* out) : out_(out) {
    const char* plain = std::getenv("NO_COLOR");
    colour_ = plain == nullptr || *plain == '\0';
    changed_ = ::tcgetattr(STDIN_FILENO, &before_) == 0;
  }
  ~TerminalScreen() override {
    echo(true);
    fmt::print(out_, "\n");
    std::fflush(out_);
  }

  void show(const LineView& view) override {
    echo(!view.secret);
    std::string page = "\033[H\033[J\n";
    const auto word = large(view.word, view.shape);
    for (const std::string& row : word) page += "  " + painted(row, view.shape) + "\n";
    if (!word.empty()) page += "\n";
    for (const std::string& line : view.lines) page += wrapped(line);
    if (!view.action.empty()) page += "\n" + wrapped(bold(view.action));
    page += "\n" + wrapped(bold(view.prompt));
    if (!view.live.empty()) page += wrapped(view.live);
    if (!view.state.empty()) page += wrapped(view.state);
    fmt::print(out_, "{}\n  > ", page);
    std::fflush(out_);
  }

 private:
  void echo(bool on) {
    if (!changed_) return;
    termios now = before_;
    if (!on) now.c_lflag &= ~static_cast<tcflag_t>(ECHO);
    ::tcsetattr(STDIN_FILENO, TCSANOW, &now);
  }
  std::string painted(const std::string& row, Shape shape) const {
    return colour_ && *colour_of(shape) != '\0' ? colour_of(shape) + row + "\033[0m" : row;
  }
  std::string bold(const std::string& text) const { return colour_ ? "\033[1m" + text + "\033[0m" : text; }

  /// Two columns of margin; broken between words at the terminal's width.
  static std::string wrapped(const std::string& text) {
    winsize size{};
    std::size_t width = 80;
    if (::ioctl(STDOUT_FILENO, TIOCGWINSZ, &size) == 0 && size.ws_col > 20) width = size.ws_col;
    std::string out = "  ";
    std::size_t at = 2;
    for (std::size_t i = 0; i < text.size();) {
      std::size_t end = text.find(' ', i);
      if (end == std::string::npos) end = text.size();
      const std::string word = text.substr(i, end - i);
      if (at > 2 && at + word.size() + 1 > width) {
        out += "\n  ";
        at = 2;
      } else if (at > 2) {
        out += " ";
        ++at;
      }
      out += word;
      at += word.size();
      i = end + 1;
    }
    return out + "\n";
  }

  std::FILE* out_;
  termios before_{};
  bool colour_, changed_;
};

/// What is new, a line each: for pipes and for who has no screen.
class PlainScreen final : public LineScreen {
 public:
  explicit PlainScreen(std::FILE* out) : out_(out) {}

  void show(const LineView& view) override {
    std::vector<std::string> now;
    if (!view.word.empty()) now.push_back(view.word);
    for (const std::string& line : view.lines) now.push_back(line);
    if (!view.action.empty()) now.push_back(view.action);
    if (now != last_) {
      for (const std::string& line : now) fmt::print(out_, "{}\n", line);
      last_ = now;
    }
    if (view.prompt != prompt_ && !view.prompt.empty()) fmt::print(out_, "> {}\n", view.prompt);
    prompt_ = view.prompt;
    std::fflush(out_);
  }

 private:
  std::FILE* out_;
  std::vector<std::string> last_;
  std::string prompt_;
};

}  // namespace

std::vector<std::string> large(const std::string& word, Shape shape) {
  if (word.empty()) return {};
  const Picture* picture = shape_of(shape);
  const bool big = has_letters(word);
  std::vector<std::string> out;
  for (std::size_t row = 0; row < rows; ++row) {
    std::string line = picture != nullptr ? std::string((*picture)[row]) + "   " : std::string();
    if (big)
      for (const char c : word) line += std::string(letters().at(std::string(1, c))[row]) + "  ";
    line = blocks(line);
    if (!big && row == rows / 2) line += word;
    out.push_back(line);
  }
  return out;
}

std::unique_ptr<LineScreen> make_terminal_screen(std::FILE* out) {
  return std::make_unique<TerminalScreen>(out);
}

std::unique_ptr<LineScreen> make_plain_screen(std::FILE* out) {
  return std::make_unique<PlainScreen>(out);
}

}  // namespace jigwright
