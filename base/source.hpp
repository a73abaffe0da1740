// Where in a user's file a value stands, and the list of faults found there. A region survives from parsing to
// judgement, so that a fault at run time still points at its line. Plain data; any thread (the text is shared and never
// changes).
#pragma once
#include <cstddef>
#include <memory>
#include <string>
#include <string_view>
#include <vector>

#include "base/error.hpp"

namespace jigwright {

struct SourceText {
  std::string name;  ///< as the user wrote it, for messages
  std::string text;
};

/// A stretch of one line. line and column count from 1, column and length in characters (code points); line 0 = the
/// whole file.
struct SourceRegion {
  std::shared_ptr<const SourceText> source;
  int line{0};
  int column{0};
  int length{1};
};

/// "plan.toml:42:26"; the file's name alone when line is 0; empty without a source.
std::string where(const SourceRegion& region);

/// Reads a whole file, at most `max_bytes`. Error kind file, with the reason.
Result<std::shared_ptr<const SourceText>> read_source(const std::string& path, std::size_t max_bytes = 16u << 20);

enum class Severity : std::uint8_t { note, warning, fault };

struct Fault {
  Severity severity{Severity::fault};
  SourceRegion region;
  std::string what;   ///< "step \"offset\": load \"100n\" is not on this jig"
  std::string to_do;  ///< "the jig has: open, 100 pF; write \"100 nF\""; may be empty
};

/// Every fault of every file of a plan, in the order found.
class Faults {
 public:
  void fault(SourceRegion region, std::string what, std::string to_do = {});
  void warning(SourceRegion region, std::string what, std::string to_do = {});
  void note(SourceRegion region, std::string what, std::string to_do = {});
  /// Puts a better fault in the place of one that was added, by its index in all().
  void replace(std::size_t index, SourceRegion region, std::string what, std::string to_do = {});
  bool any() const { return faults_ > 0; }  ///< a true fault, not a warning or note
  std::size_t count(Severity severity) const;
  const std::vector<Fault>& all() const { return list_; }

 private:
  void add(Severity severity, SourceRegion region, std::string what, std::string to_do);
  std::vector<Fault> list_;
  std::size_t faults_{0};
};

/// One fault as a person reads it: place and text, the line, a caret under the stretch, what to do.
///     plan.toml:42:26: step "offset-under-load": load "100n" is not on this jig
///       loads = ["open", "100 pF", "100n"]
///                                  ^^^^^^
///       the jig has: open, 47 pF, 100 pF, 1 nF, 100 nF; write "100 nF"
/// A warning or note says so behind the place. Lines are cut to about 100 characters round the stretch, and advice is
/// wrapped at that width.
std::string render(const Fault& fault);

/// All of them sorted by file (in order of first mention), line and column, each told once; a summary line at the end
/// is the caller's.
std::string render(const Faults& faults);

}  // namespace jigwright
