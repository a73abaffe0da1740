#include "base/source.hpp"

#include <sys/stat.h>

#include <algorithm>
#include <cerrno>
#include <cstdio>
#include <cstring>

namespace jigwright {
namespace {

bool continues(char c) {
  return (static_cast<unsigned char>(c) & 0xC0u) == 0x80u;
}

/// Byte offset of the character with this index (from 0), clamped to the end.
std::size_t byte_of(std::string_view text, std::size_t index) {
  std::size_t at = 0;
  for (std::size_t seen = 0; at < text.size() && seen < index; ++seen) {
    ++at;
    while (at < text.size() && continues(text[at])) ++at;
  }
  return at;
}

std::size_t characters(std::string_view text) {
  return static_cast<std::size_t>(std::count_if(text.begin(), text.end(), [](char c) { return !continues(c); }));
}

std::string_view line_of(std::string_view text, int line) {
  for (int at = 1; at < line; ++at) {
    const auto end = text.find('\n');
    if (end == std::string_view::npos) return {};
    text.remove_prefix(end + 1);
  }
  text = text.substr(0, text.find('\n'));
  if (text.ends_with('\r')) text.remove_suffix(1);
  return text;
}

constexpr std::size_t widest = 100;

/// The line, cut to `widest` characters round the stretch, and a caret line beneath it.
std::string excerpt(const SourceRegion& region) {
  const std::string_view line = line_of(region.source->text, region.line);
  const std::size_t length = characters(line);
  std::size_t column = region.column > 0 ? static_cast<std::size_t>(region.column) - 1 : 0;
  column = std::min(column, length);
  std::size_t first = 0;
  while (first < length && (line[first] == ' ' || line[first] == '\t')) ++first;
  if (column < first) first = column;
  if (column - first > widest - 20) first = column - (widest - 20);
  const std::size_t begin = byte_of(line, first);
  const std::size_t end = byte_of(line, std::min(length, first + widest));
  const auto carets = std::clamp<std::size_t>(static_cast<std::size_t>(std::max(region.length, 1)), 1,
                                              std::max<std::size_t>(1, std::min(length, first + widest) - column));
  std::string shown(line.substr(begin, end - begin));
  std::replace(shown.begin(), shown.end(), '\t', ' ');
  return "  " + printable(shown) + "\n  " + std::string(column - first, ' ') + std::string(carets, '^') + "\n";
}

/// Lines of at most `widest` characters, broken at spaces, each indented by two.
std::string wrapped(std::string_view text) {
  std::string out;
  while (characters(text) > widest) {
    const std::size_t end = byte_of(text, widest);
    const std::size_t space = text.substr(0, end).rfind(' ');
    const std::size_t cut = space == std::string_view::npos || space == 0 ? end : space;
    out += "  " + std::string(text.substr(0, cut)) + "\n";
    text.remove_prefix(cut);
    while (text.starts_with(' ')) text.remove_prefix(1);
  }
  return out + "  " + std::string(text) + "\n";
}

}  // namespace

std::string where(const SourceRegion& region) {
  if (!region.source) return {};
  if (region.line == 0) return region.source->name;
  return region.source->name + ":" + std::to_string(region.line) + ":" + std::to_string(region.column);
}

Result<std::shared_ptr<const SourceText>> read_source(const std::string& path, std::size_t max_bytes) {
  auto fail = [&](std::string what, std::string to_do) {
    return Error{Error::Kind::file, std::move(what), path, std::move(to_do)};
  };
  struct stat status {};
  if (::stat(path.c_str(), &status) != 0)
    return fail(std::string("can't read the file: ") + std::strerror(errno), "check the path");
  if (!S_ISREG(status.st_mode)) return fail("this is not a plain file", "name a file");
  std::FILE* file = std::fopen(path.c_str(), "rb");
  if (file == nullptr)
    return fail(std::string("can't read the file: ") + std::strerror(errno), "check its permissions");
  auto source = std::make_shared<SourceText>();
  source->name = path;
  char buffer[1 << 16];
  std::size_t got = 0;
  while ((got = std::fread(buffer, 1, sizeof buffer, file)) > 0 && source->text.size() <= max_bytes)
    source->text.append(buffer, got);
  const bool bad = std::ferror(file) != 0;
  std::fclose(file);
  if (bad) return fail("reading the file failed", "check the disk");
  if (source->text.size() > max_bytes)
    return fail("the file is larger than " + std::to_string(max_bytes >> 20) + " MiB", "split it");
  return std::shared_ptr<const SourceText>(std::move(source));
}

void Faults::add(Severity severity, SourceRegion region, std::string what, std::string to_do) {
  if (severity == Severity::fault) ++faults_;
  list_.push_back({severity, std::move(region), std::move(what), std::move(to_do)});
}

void Faults::fault(SourceRegion region, std::string what, std::string to_do) {
  add(Severity::fault, std::move(region), std::move(what), std::move(to_do));
}
void Faults::warning(SourceRegion region, std::string what, std::string to_do) {
  add(Severity::warning, std::move(region), std::move(what), std::move(to_do));
}
void Faults::note(SourceRegion region, std::string what, std::string to_do) {
  add(Severity::note, std::move(region), std::move(what), std::move(to_do));
}

void Faults::replace(std::size_t index, SourceRegion region, std::string what, std::string to_do) {
  Fault& f = list_.at(index);
  f.region = std::move(region);
  f.what = std::move(what);
  f.to_do = std::move(to_do);
}

std::size_t Faults::count(Severity severity) const {
  return static_cast<std::size_t>(
      std::count_if(list_.begin(), list_.end(), [&](const Fault& f) { return f.severity == severity; }));
}

std::string render(const Fault& fault) {
  std::string out = printable(where(fault.region));
  if (!out.empty()) out += ": ";
  if (fault.severity == Severity::warning) out += "warning: ";
  if (fault.severity == Severity::note) out += "note: ";
  out += printable(fault.what) + "\n";
  if (fault.region.source && fault.region.line > 0) out += excerpt(fault.region);
  if (!fault.to_do.empty()) out += wrapped(printable(fault.to_do));
  return out;
}

std::string render(const Faults& faults) {
  std::vector<const SourceText*> files;
  for (const Fault& f : faults.all())
    if (std::find(files.begin(), files.end(), f.region.source.get()) == files.end())
      files.push_back(f.region.source.get());
  auto rank = [&](const Fault& f) {
    return std::find(files.begin(), files.end(), f.region.source.get()) - files.begin();
  };
  std::vector<const Fault*> sorted;
  for (const Fault& f : faults.all()) sorted.push_back(&f);
  std::stable_sort(sorted.begin(), sorted.end(), [&](const Fault* a, const Fault* b) {
    if (rank(*a) != rank(*b)) return rank(*a) < rank(*b);
    if (a->region.line != b->region.line) return a->region.line < b->region.line;
    return a->region.column < b->region.column;
  });
  std::string out;
  std::string before;
  for (const Fault* f : sorted) {
    std::string text = render(*f);
    if (text != before) out += text;
    before = std::move(text);
  }
  return out;
}

}  // namespace jigwright
