// A TOML file as a plain tree that keeps each value's place, and a reader that collects every fault of meaning while a
// room picks out its values. toml++ stays inside toml.cpp. Plain data; any thread.
#pragma once
#include <cstdint>
#include <functional>
#include <memory>
#include <optional>
#include <string>
#include <string_view>
#include <variant>
#include <vector>

#include "base/quantity.hpp"
#include "base/source.hpp"

namespace jigwright {

struct Node;
struct Member;
using Array = std::vector<Node>;
using Table = std::vector<Member>;  ///< in the file's order

struct Node {
  /// Dates and times are kept as their text.
  std::variant<std::string, std::int64_t, double, bool, Array, Table> value;
  SourceRegion region;
  bool is_date{false};

  const std::string* text() const { return std::get_if<std::string>(&value); }
  const Array* array() const { return std::get_if<Array>(&value); }
  const Table* table() const { return std::get_if<Table>(&value); }
  std::string_view kind_name() const;  ///< "a text", "a number", "a table" ...
};

struct Member {
  std::string key;
  SourceRegion key_region;
  Node node;
};

/// The member with this key; nullptr when absent.
const Node* find(const Table& table, std::string_view key);

/// Parses; the first fault of syntax goes to `faults` and nothing comes back.
std::optional<Node> parse_toml(std::shared_ptr<const SourceText> source, Faults& faults);

template <class T>
struct Located {
  T value{};
  SourceRegion region;
};

/// Bounds outside which a value is legal but doubtful. If the value times or over 1e9 would lie inside, an m/M slip is
/// suspected and named in the warning: "5 mohm" where megohm is plausible.
struct Plausible {
  double low{};
  double high{};
};

/// Picks values out of one table. Every miss is a fault with the place, what is expected and what was found; the caller
/// goes on with a harmless default. Call finish() once: keys nobody asked for are faults, with the nearest known key.
class TableReader {
 public:
  /// @param about  opens each message: "step \"offset\"", "relay \"K3\"", "jig.toml"
  TableReader(const Node& node, std::string about, Faults& faults);

  bool has(std::string_view key);
  const SourceRegion& region() const { return node_.region; }
  const std::string& about() const { return about_; }
  void rename(std::string about) { about_ = std::move(about); }
  Faults& faults() { return faults_; }

  std::optional<Located<std::string>> text(std::string_view key);
  Located<std::string> need_text(std::string_view key);
  std::optional<Located<double>> quantity(std::string_view key, Unit unit, std::optional<Plausible> plausible = {});
  Located<double> need_quantity(std::string_view key, Unit unit, std::optional<Plausible> plausible = {});
  /// As need_quantity, and the value must be above zero.
  Located<double> need_positive(std::string_view key, Unit unit, std::optional<Plausible> plausible = {});
  /// As need_quantity, and the value must be zero or above.
  Located<double> need_not_negative(std::string_view key, Unit unit, std::optional<Plausible> plausible = {});
  std::optional<Located<std::int64_t>> integer(std::string_view key, std::int64_t low, std::int64_t high);
  Located<std::int64_t> need_integer(std::string_view key, std::int64_t low, std::int64_t high);
  std::optional<Located<bool>> boolean(std::string_view key);
  /// One of the words; a misspelt one is a fault with the nearest.
  std::optional<Located<std::string>> choice(std::string_view key, const std::vector<std::string>& words);
  Located<std::string> need_choice(std::string_view key, const std::vector<std::string>& words);
  /// The key "id", which then names the table in messages ("load \"1 nF\""); a second use is a fault that names the
  /// first.
  Located<std::string> need_id(std::string_view thing, std::vector<Located<std::string>>& seen);
  /// A text or an array of texts.
  std::vector<Located<std::string>> texts(std::string_view key);
  std::vector<Located<std::string>> need_texts(std::string_view key);
  /// A quantity or an array of quantities.
  std::vector<Located<double>> quantities(std::string_view key, Unit unit);
  /// A quantity of whatever unit; a bare number is a count.
  std::optional<Located<Quantity>> any_quantity(std::string_view key);
  /// A sub-table; nullptr when absent or not a table (then a fault).
  const Node* table(std::string_view key);
  const Node* need_table(std::string_view key);
  /// Array of tables ([[key]]); empty when absent.
  std::vector<const Node*> tables(std::string_view key);
  /// Any node at all (marks the key as known); nullptr when absent.
  const Node* node(std::string_view key);

  void fault(const SourceRegion& region, std::string what, std::string to_do = {});
  void warning(const SourceRegion& region, std::string what, std::string to_do = {});
  void finish();

 private:
  const Node* ask(std::string_view key);
  void missing(std::string_view key, std::string_view expected);
  void wrong_kind(std::string_view key, const Node& found, std::string_view expected);
  struct Missing {
    std::string key;
    std::size_t index;  ///< of its fault
  };
  void unknown(const Member& member);
  void no_quantity(const Node& found, std::string_view key, Unit unit);
  void doubt(const Node& found, std::string_view key, double value, Unit unit, Plausible usual);
  Located<double> need_signed(std::string_view key, Unit unit, std::optional<Plausible> plausible,
                              bool (*allowed)(double), std::string_view expected);
  std::optional<Located<double>> read_quantity(const Node& node, std::string_view key, Unit unit,
                                               std::optional<Plausible> plausible);

  const Node& node_;
  std::string about_;
  Faults& faults_;
  std::vector<std::string> known_;
  std::vector<Missing> missing_;
};

}  // namespace jigwright
