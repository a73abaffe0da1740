#include "tests/db/factory.hpp"

#include <fmt/format.h>

#include <algorithm>

namespace jigwright::room {
namespace {

constexpr std::int64_t first_us = 1'767'960'000'000'000;  // 2026-01-09T12:00:00Z
constexpr const char* steps[] = {"offset", "gain", "noise", "under-load"};

/// splitmix64 (Steele, Lea, Flood 2014, from memory): one number for one key.
std::uint64_t mixed(std::uint64_t x) {
  x += 0x9e3779b97f4a7c15u;
  x = (x ^ (x >> 30)) * 0xbf58476d1ce4e5b9u;
  x = (x ^ (x >> 27)) * 0x94d049bb133111ebu;
  return x ^ (x >> 31);
}

std::shared_ptr<const SourceText> source(std::string name, std::string text) {
  return std::make_shared<const SourceText>(SourceText{std::move(name), std::move(text)});
}

/// +/- 0.5 mV, less 20 uV for the uncertainty.
Limit limit() {
  Limit l;
  l.specification = {-0.5e-3, 0.5e-3};
  l.nominal = 0;
  l.budget_U = l.width = 20e-6;
  l.applied = {-0.48e-3, 0.48e-3};
  return l;
}

FindingRow finding_row(int index) {
  FindingRow row;
  row.metric.name = {steps[index % 4], "offset", fmt::format("x{} with load {}", index / 4 + 1, index % 7)};
  row.metric.unit = Unit::volt;
  row.limit = limit();
  row.judged.finding = {index, 0, 4e-6, 10, FindingState::measured};
  return row;
}

/// A file's text of about two kilobytes.
std::string document(const std::string& name) {
  std::string out = "[" + name + "]\n";
  for (int i = 0; i < 50; ++i) out += fmt::format("entry_{} = \"{} of the factory, {}\"\n", i, name, i * i);
  return out;
}

}  // namespace

Factory::Factory(const FactoryOptions& options) : options_(options) {
  start_.station = "bench 1";
  start_.origin = Origin::simulated;
  start_.operator_name = "A. Tester";
  start_.program = "jigwright 0.1.0";
  start_.depth = "full";
  start_.documents = {{"plan", "plan.toml", document("plan")},
                      {"jig", "jig.toml", document("jig")},
                      {"limits", "limits.toml", document("limits")}};
  start_.plan = "plan-1";
  start_.limit_set = "limits-1";
  start_.limit_revision = 3;
  end_.instruments = {{"meter", "Alder Works", "M6", "0001", "1.0"}, {"relays", "Pier Parts", "R64", "0002", "2.1"}};
  end_.reduce_versions = {{"offset", 1}, {"gain", 1}, {"noise", 1}, {"under-load", 2}};
  end_.ambient_C = 23.5;
  for (int i = 0; i < options_.findings; ++i) end_.findings.push_back(finding_row(i));
}

std::string Factory::serial(std::int64_t board) const {
  return fmt::format("FX-{:07}", board + 1);
}
std::string Factory::order(std::int64_t board) const {
  return fmt::format("WO-{}", 2001 + board / options_.boards_per_order);
}
std::int64_t Factory::build_no(std::int64_t board) const {
  return board % options_.boards_per_order + 1;
}
std::string Factory::designator(int place) const {
  return place < 10 ? fmt::format("U{}", place + 1) : fmt::format("R{}", place - 9);
}

std::int64_t Factory::stretch(int place) const {
  return place < 10 ? 200 + 37 * place : 5000;
}
std::int64_t Factory::reel_number(int place, std::int64_t board) const {
  return board / stretch(place) + 1;
}
std::string Factory::reel(int place, std::int64_t board) const {
  return fmt::format("R-{:02}{:05}", place + 1, reel_number(place, board));
}
bool Factory::second_source(std::int64_t board) const {
  return reel_number(driver, board) % 5 == 3;
}

double Factory::noise(std::int64_t board, int index) const {
  // Twelve uniform numbers, four from each of three draws: near enough to a normal one.
  double sum = -6;
  for (std::uint64_t draw = 0; draw < 3; ++draw) {
    std::uint64_t bits =
        mixed(mixed(options_.seed ^ static_cast<std::uint64_t>(board)) + static_cast<std::uint64_t>(index) * 3 + draw);
    for (int i = 0; i < 4; ++i, bits >>= 16) sum += (static_cast<double>(bits & 0xffffu) + 0.5) / 65536;
  }
  return sum;
}

std::string Factory::raw(std::int64_t board) const {
  std::string out(static_cast<std::size_t>(options_.readings) * 3 / 2, '\0');
  std::uint64_t state = mixed(options_.seed + static_cast<std::uint64_t>(board) * 977);
  for (char& c : out) c = static_cast<char>((state = mixed(state)) & 0x3fu);
  return out;
}

TrialStart Factory::start(std::int64_t board) const {
  TrialStart out = start_;
  out.serial = serial(board);
  out.order = order(board);
  out.at_us = first_us + board * 9'000'000;
  return out;
}

TrialEnd Factory::end(std::int64_t board) const {
  TrialEnd out = end_;
  out.took_ms = 8000 + board % 97;
  out.outcome.judgement = Judgement::go;
  const double shift_V = second_source(board) ? 0.4e-3 : 0;
  for (int i = 0; i < options_.findings; ++i) {
    FindingRow& row = out.findings[static_cast<std::size_t>(i)];
    row.judged.finding.value = 60e-6 * noise(board, i) + (i % 4 == 3 ? shift_V : 0);
    row.judged = judge(row.judged.finding, &*row.limit, true);
    if (row.judged.verdict != Verdict::missed || out.outcome.deciding >= 0) continue;
    out.outcome.judgement = Judgement::no_go;
    out.outcome.deciding = i;
  }
  out.readings = raw(board);
  return out;
}

std::vector<std::shared_ptr<const SourceText>> Factory::lists(std::int64_t first_board) const {
  const std::int64_t last = std::min(first_board + options_.boards_per_order, options_.boards) - 1;
  std::string boards_text = "order,build_no,serial,panel,product\n";
  for (std::int64_t b = first_board; b <= last; ++b)
    boards_text += fmt::format("{},{},{},P{:06},bridge amplifier\n", order(b), build_no(b), serial(b), b / 4);
  std::string reels_text = "reel,maker,part,lot,date_code,distributor,rereeled,quantity,marking\n";
  std::string feeds_text = "order,designator,reel,from,to\n";
  for (int place = 0; place < places; ++place)
    for (std::int64_t b = first_board; b <= last;) {
      const std::int64_t end = std::min(reel_number(place, b) * stretch(place) - 1, last);
      reels_text += fmt::format("{0},{1},AW-{2},{2}-{3},2438,Pier Parts,no,10000,AW {2}\n", reel(place, b),
                                place == driver && second_source(b) ? "Quay Semi" : "Alder Works", designator(place),
                                reel_number(place, b) / 3);
      feeds_text +=
          fmt::format("{},{},{},{},{}\n", order(b), designator(place), reel(place, b), build_no(b), build_no(end));
      b = end + 1;
    }
  return {source("boards.csv", std::move(boards_text)), source("reels.csv", std::move(reels_text)),
          source("feeds.csv", std::move(feeds_text))};
}

Result<Done> Factory::enter_all(Store& store) const {
  for (std::int64_t first = 0; first < options_.boards; first += options_.boards_per_order) {
    Faults faults;
    const auto entered = store.enter(lists(first), first_us, faults);
    if (!entered) return entered.error();
    if (faults.any()) return Error{Error::Kind::internal, "the factory's lists have faults", render(faults), {}};
  }
  return Done{};
}

Result<Done> Factory::fill(Store& store) const {
  if (const auto entered = enter_all(store); !entered) return entered;
  for (std::int64_t board = 0; board < options_.boards; ++board) {
    const auto open = store.begin_trial(start(board));
    if (!open) return open.error();
    if (const auto done = store.finish_trial(open.value(), end(board)); !done) return done;
  }
  return Done{};
}

}  // namespace jigwright::room
