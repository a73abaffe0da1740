// Kind "question": asks the operator, yes or no, or for a value within bounds. Keys: ask; answer = "yes" or "no", or
// low and high with one unit; powered (true: the board is supplied meanwhile).
#include <fmt/format.h>

#include "steps/common.hpp"
#include "steps/kinds.hpp"

namespace jigwright {
namespace {

class QuestionStep final : public Step {
 public:
  void lay_out(const StepContext& context, const Ask& ask, bool powered) {
    Setting s = powered ? powered_setting(context, "ask", "question") : unpowered_setting(context, "ask", "question");
    if (powered) short_input(s, *context.jig);
    s.act = ask;
    layout_ = Layout(context);
    layout_.add(std::move(s));
    layout_.metric("answer", "", ask.unit, About::board, ask.low, ask.high);
  }

  Expansion expand(Depth) const override { return layout_.named(id); }

  /// A person's answer has no stated uncertainty.
  std::vector<Finding> reduce(Depth, std::span<const SettingRecord> records,
                              std::span<const Setting> settings) const override {
    const Records played(records, settings, layout_.settings());
    const auto read = played.sample(0);
    if (!read) return {};
    return {found(0, read->state, read->mean, std::numeric_limits<double>::quiet_NaN(), read->n)};
  }

 private:
  Layout layout_;
};

std::optional<Located<Quantity>> read_any_quantity(TableReader& reader, std::string_view key) {
  const auto text = reader.text(key);
  if (!text) return std::nullopt;
  const auto quantity = parse_quantity(text->value);
  if (quantity) return Located<Quantity>{quantity.value(), text->region};
  reader.fault(text->region, fmt::format("\"{}\": {}", key, quantity.error().what), quantity.error().to_do);
  return std::nullopt;
}

void read_bounds(TableReader& reader, Ask& ask) {
  const auto low = read_any_quantity(reader, "low");
  const auto high = read_any_quantity(reader, "high");
  if (!low || !high) {
    if (!reader.has("low") || !reader.has("high"))
      reader.fault(reader.region(), "needs \"answer\", or both \"low\" and \"high\"",
                   "write answer = \"yes\", or low = \"4 V\" and high = \"5 V\", say");
    return;
  }
  if (low->value.unit != high->value.unit)
    reader.fault(
        high->region,
        fmt::format("\"high\" is {}, \"low\" is {}", quantity_name(high->value.unit), quantity_name(low->value.unit)),
        "write both with the same unit");
  else if (low->value.value > high->value.value)
    reader.fault(high->region, "\"high\" is less than \"low\"", "exchange them");
  ask.yes_no = false;
  ask.unit = low->value.unit;
  ask.low = low->value.value;
  ask.high = high->value.value;
}

}  // namespace

std::unique_ptr<Step> read_question(TableReader& reader, const StepContext& context) {
  const CleanRead clean(reader, context);
  auto step = std::make_unique<QuestionStep>();
  Ask ask;
  ask.question = reader.need_text("ask").value;
  const auto answer = reader.choice("answer", {"yes", "no"});
  if (answer) ask.low = ask.high = answer->value == "yes" ? 1 : 0;
  if (!reader.has("answer")) read_bounds(reader, ask);
  if (reader.has("answer") && (reader.has("low") || reader.has("high")))
    reader.fault(reader.region(), "has both \"answer\" and bounds", "keep one of them");
  const auto powered = reader.boolean("powered");
  if (clean.ok()) step->lay_out(context, ask, powered ? powered->value : true);
  return step;
}

}  // namespace jigwright
