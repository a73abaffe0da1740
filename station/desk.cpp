#include "station/desk.hpp"

#include <fmt/format.h>

#include <CLI/CLI.hpp>
#include <map>
#include <set>

#include "db/act.hpp"
#include "db/boards.hpp"
#include "db/feeds.hpp"
#include "db/people.hpp"
#include "db/revisions.hpp"
#include "db/sqlite.hpp"
#include "db/store.hpp"
#include "db/week.hpp"
#include "sequencer/plan.hpp"
#include "sequencer/station_file.hpp"
#include "station/authority.hpp"
#include "station/exit_codes.hpp"
#include "station/fail.hpp"

namespace jigwright {
namespace {

std::string count(std::size_t n, const char* one) {
  return fmt::format("{} {}{}", n, one, n == 1 ? "" : "s");
}

/// "TB3-0001, TB3-0002 and 61 more".
std::string some(const std::vector<std::string>& serials) {
  constexpr std::size_t most = 4;
  std::string out;
  for (std::size_t i = 0; i < serials.size() && i < most; ++i) out += (i == 0 ? "" : ", ") + printable(serials[i]);
  if (serials.size() > most) out += fmt::format(" and {} more", serials.size() - most);
  return out;
}

Error usage(std::string what, std::string to_do) {
  return {Error::Kind::usage, std::move(what), {}, std::move(to_do)};
}

/// What every command here may be told.
struct Told {
  BoardChoice boards;
  Signature signature;
  std::string reason, second, to, designator, reel, name, role, badge, new_password_file, serial, new_serial, plan,
      earlier, order, from_serial;
  std::int64_t from_build{0};
};

/// A command under way: the open store, and who does it.
struct Desk {
  Store& store;
  const StationFile& station;
  Told& told;
  std::string who;

  Database& db() { return store.database(); }
  UuidMaker& uuids() { return store.uuids(); }
  ActRecord act(const std::string& kind) const {
    ActRecord out;
    out.kind = kind;
    out.at_us = utc_us();
    out.station = station.name;
    out.who = who;
    out.second = told.second;
    out.reason = told.reason;
    return out;
  }
};

Result<Done> need_reason(const Desk& desk) {
  if (desk.told.reason.find_first_not_of(' ') == std::string::npos)
    return usage("a reason is missing", "say why in --reason \"...\": it stands in the record");
  return Done{};
}

/// What is done to each of the chosen boards is one act; `bar` may refuse it for the sake of one.
int to_boards(Desk& desk, const std::string& kind, const std::string& done,
              const std::function<std::string(const BoardNow&)>& bar, ActRecord act) {
  Transaction transaction(desk.db(), Transaction::Kind::write);
  const auto chosen = chosen_boards(desk.db(), desk.told.boards);
  if (!chosen) return fail(chosen.error());
  std::vector<std::string> refused;
  for (const std::string& serial : chosen.value()) {
    const std::string why = bar(read_board_now(desk.db(), serial));
    if (!why.empty()) refused.push_back(why);
  }
  if (!refused.empty()) {
    for (std::size_t i = 0; i < refused.size() && i < 20; ++i) fmt::print(stderr, "  {}\n", printable(refused[i]));
    if (refused.size() > 20) fmt::print(stderr, "  and {} more\n", refused.size() - 20);
    return fail(usage(fmt::format("{} can't be done for {} of {}: nothing was recorded", kind, refused.size(),
                                  count(chosen.value().size(), "board")),
                      "leave those out, or settle them first"));
  }
  if (chosen.value().empty() && act.values.empty())
    return fail(usage("no board is all of that", "nothing was recorded"));
  act.boards = chosen.value();
  add_act(desk.db(), desk.uuids(), act);
  if (const auto recorded = transaction.commit(); !recorded) return fail(recorded.error());
  fmt::print("{} {}: {}\n", count(act.boards.size(), "board"), done,
             act.boards.empty() ? "none is known yet" : some(act.boards));
  return exit_go;
}

std::string none(const BoardNow&) {
  return {};
}

/// A hold by order, reel or lot alone also takes in boards that become known later; so does nothing else.
void add_rule(const BoardChoice& choice, ActRecord& act) {
  const std::pair<const char*, const std::string*> rules[] = {
      {"order", &choice.order}, {"reel", &choice.reel}, {"lot", &choice.lot}};
  int named = choice.serials.empty() && choice.condition.empty() ? 0 : 2;
  for (const auto& [by, name] : rules) {
    if (name->empty()) continue;
    act.about += (act.about.empty() ? "" : ", ") + std::string(by) + " " + *name;
    act.values["by"] = by;
    act.values["name"] = *name;
    ++named;
  }
  if (!choice.condition.empty()) act.about += (act.about.empty() ? "" : ", ") + choice.condition;
  if (named != 1) act.values.clear();
}

int hold(Desk& desk) {
  ActRecord act = desk.act("hold");
  add_rule(desk.told.boards, act);
  return to_boards(desk, "hold", "held", none, std::move(act));
}

/// Lifts every hold that is in force on the chosen boards. What names an order, a reel or a lot alone ends the holds by
/// just that, for boards that become known later too.
int lift(Desk& desk, const std::string& kind) {
  Transaction transaction(desk.db(), Transaction::Kind::write);
  const auto chosen = chosen_boards(desk.db(), desk.told.boards);
  if (!chosen) return fail(chosen.error());
  std::map<std::string, std::vector<std::string>> boards_by_hold;
  for (const std::string& serial : chosen.value())
    for (const HoldOn& hold : read_board_now(desk.db(), serial).holds)
      boards_by_hold[std::string(bytes(hold.uuid))].push_back(serial);
  ActRecord rule;
  add_rule(desk.told.boards, rule);
  std::set<std::string> ended;
  for (const ActRecord& hold : rules_in_force(desk.db()))
    if (hold.values == rule.values) ended.insert(std::string(bytes(hold.uuid)));
  for (const std::string& hold : ended) boards_by_hold[hold];
  if (boards_by_hold.empty()) return fail(usage("none of these boards is held", "nothing was recorded"));
  std::size_t lifted = 0;
  for (auto& [hold, boards] : boards_by_hold) {
    ActRecord act = desk.act(kind);
    act.ends = uuid_from_bytes(hold);
    act.boards = std::move(boards);
    if (ended.contains(hold)) act.values = rule.values;
    lifted += std::max<std::size_t>(act.boards.size(), 1);
    add_act(desk.db(), desk.uuids(), act);
  }
  if (const auto recorded = transaction.commit(); !recorded) return fail(recorded.error());
  fmt::print("{} lifted. Judgements stay as they are.\n", count(lifted, "hold"));
  return exit_go;
}

int scrap(Desk& desk) {
  return to_boards(
      desk, "scrap", "scrapped",
      [](const BoardNow& b) {
        const auto state = b.standing.state();
        return state == BoardState::scrapped  ? sentence(Bar::scrapped, b)
               : state == BoardState::shipped ? sentence(Bar::shipped, b)
                                              : std::string();
      },
      desk.act("scrap"));
}

int ship(Desk& desk) {
  if (desk.told.to.empty()) return fail(usage("the receiver is missing", "say to whom in --to \"...\""));
  ActRecord act = desk.act("ship");
  act.about = desk.told.to;
  return to_boards(
      desk, "shipment", "shipped to " + printable(desk.told.to),
      [](const BoardNow& b) { return sentence(b.standing.may_ship(), b); }, std::move(act));
}

int allow(Desk& desk) {
  return to_boards(desk, "leave", "may be tried again", none, desk.act("allow"));
}

/// A review is about a trial: one act for each board.
int review(Desk& desk) {
  Transaction transaction(desk.db(), Transaction::Kind::write);
  const auto chosen = chosen_boards(desk.db(), desk.told.boards);
  if (!chosen) return fail(chosen.error());
  std::vector<std::string> reviewed;
  for (const std::string& serial : chosen.value()) {
    for (std::string no_go; !(no_go = read_board_now(desk.db(), serial).standing.to_review()).empty();) {
      ActRecord act = desk.act("review");
      act.boards = {serial};
      act.trial = uuid_from_bytes(no_go);
      add_act(desk.db(), desk.uuids(), act);
      if (desk.db().failed()) break;
      if (reviewed.empty() || reviewed.back() != serial) reviewed.push_back(serial);
    }
  }
  if (reviewed.empty())
    return fail(usage("none of these boards waits for a review", "a review is due after NO-GO and then GO"));
  if (const auto recorded = transaction.commit(); !recorded) return fail(recorded.error());
  fmt::print("{} reviewed, the last GO counts: {}\n", count(reviewed.size(), "board"), some(reviewed));
  return exit_go;
}

int repair(Desk& desk) {
  if (desk.told.designator.empty())
    return fail(usage("what was replaced is missing", "name the place in --replaced U7"));
  Transaction transaction(desk.db(), Transaction::Kind::write);
  ActRecord act = desk.act("repair");
  act.boards = {desk.told.serial};
  act.values["replaced"] = desk.told.designator;
  const BoardNow board = read_board_now(desk.db(), desk.told.serial);
  if (!board.known) return fail(usage(fmt::format("board {} is not known", printable(desk.told.serial)), "check it"));
  act.boards = {board.serial};
  if (!desk.told.reel.empty()) {
    act.values["reel"] = desk.told.reel;
    const auto feed = add_repair_feed(
        desk.db(), desk.uuids(),
        {desk.told.designator, desk.told.reel, board.serial, {}, 0, desk.station.name, desk.who, act.at_us});
    if (!feed) return fail(feed.error());
  }
  add_act(desk.db(), desk.uuids(), act);
  if (const auto recorded = transaction.commit(); !recorded) return fail(recorded.error());
  fmt::print("Repair of {} is on record: {} replaced{}. It may be tried again, with the full sweep.\n",
             printable(board.serial), printable(desk.told.designator),
             desk.told.reel.empty() ? "" : " from reel " + printable(desk.told.reel));
  return exit_go;
}

int relabel(Desk& desk) {
  Transaction transaction(desk.db(), Transaction::Kind::write);
  const BoardNow board = read_board_now(desk.db(), desk.told.serial);
  if (!board.known)
    return fail(usage(fmt::format("board {} is not known", printable(desk.told.serial)), "check the serial"));
  if (read_board_now(desk.db(), desk.told.new_serial).known)
    return fail(usage(fmt::format("{} is a board of its own", printable(desk.told.new_serial)),
                      "a label can't be put over another board's serial"));
  ActRecord act = desk.act("alias");
  act.about = desk.told.new_serial;
  act.boards = {board.serial};
  add_act(desk.db(), desk.uuids(), act);
  if (const auto recorded = transaction.commit(); !recorded) return fail(recorded.error());
  fmt::print("A scan of {} now means board {}.\n", printable(desk.told.new_serial), printable(board.serial));
  return exit_go;
}

int holds(Store& store) {
  Database& db = store.database();
  Transaction reading(db, Transaction::Kind::read);
  const auto all = acts_of(db, "hold");
  std::map<std::string, std::vector<std::string>> open;
  std::vector<std::string> serials;
  {
    Query q = db.query("SELECT serial FROM board ORDER BY serial");
    while (q.next()) serials.push_back(q.text(0));
  }
  if (!all.empty())
    for (const std::string& serial : serials)
      for (const HoldOn& hold : read_board_now(db, serial).holds) open[std::string(bytes(hold.uuid))].push_back(serial);
  std::set<Uuid> rules;
  for (const ActRecord& act : rules_in_force(db)) rules.insert(act.uuid);
  if (const auto done = reading.commit(); !done) return fail(done.error());
  std::size_t shown = 0;
  for (const ActRecord& act : all) {
    const auto found = open.find(std::string(bytes(act.uuid)));
    if (found == open.end() && !rules.contains(act.uuid)) continue;
    const std::vector<std::string> boards = found == open.end() ? std::vector<std::string>() : found->second;
    ++shown;
    fmt::print("{}  {}  {}\n    {}{}: {}\n", utc_text(act.at_us), printable(act.who), printable(act.reason),
               count(boards.size(), "board"), act.about.empty() ? "" : " by " + printable(act.about),
               boards.empty() ? "none is known yet" : some(boards));
  }
  if (shown == 0) fmt::print("No board is held.\n");
  return exit_go;
}

int change_reel_at(Desk& desk) {
  if (desk.told.from_serial.empty() && (desk.told.order.empty() || desk.told.from_build == 0))
    return fail(usage("where the change falls is missing", "give --from SERIAL, or --order O and --from-place N"));
  const auto changed = change_reel(desk.db(), desk.uuids(),
                                   {desk.told.designator, desk.told.reel, desk.told.from_serial, desk.told.order,
                                    desk.told.from_build, desk.station.name, desk.who, utc_us()});
  if (!changed) return fail(changed.error());
  const FeedChanged& c = changed.value();
  fmt::print("Reel {} serves {} of order {} from place {} on{}.\n", printable(desk.told.reel),
             printable(desk.told.designator), printable(c.order), c.from,
             c.before.empty() ? "" : "; before it, " + printable(c.before));
  return exit_go;
}

int list_people(Store& store) {
  const auto people = all_people(store.database());
  if (store.database().failed()) return fail(store.database().error());
  for (const PersonNow& p : people)
    fmt::print("{:24} {:10} {}{}\n", printable(p.name), p.role,
               p.badge.empty() ? "no badge" : "badge " + printable(p.badge),
               p.gone                                          ? ", gone"
               : p.role == engineer_role && p.password.empty() ? ", password to be set again"
                                                               : "");
  if (people.empty())
    fmt::print("Nobody is registered: every name is taken as given, and no command asks for a password.\n");
  return exit_go;
}

int add_person(Desk& desk, bool gone) {
  PersonChange change;
  change.name = desk.told.name;
  change.role = desk.told.role;
  change.badge = desk.told.badge;
  change.gone = gone;
  change.by = desk.who;
  change.station = desk.station.name;
  change.at_us = utc_us();
  const auto before = person_of(desk.db(), change.name);
  if (gone && !before) return fail(usage(printable(change.name) + " is not registered", "nothing was changed"));
  if (before && change.role.empty()) change.role = before->role;
  if (before && change.badge.empty()) change.badge = before->badge;
  if (!gone && change.role == engineer_role &&
      (!before || before->password.empty() || !desk.told.new_password_file.empty())) {
    auto password = read_password(desk.told.new_password_file, "New password for " + change.name);
    if (!password) return fail(password.error());
    change.password = std::move(password.value());
  }
  if (const auto done = change_person(desk.db(), desk.uuids(), change); !done) return fail(done.error());
  fmt::print("{} is {}.\n", printable(change.name), gone ? "registered as gone" : "registered as " + change.role);
  return exit_go;
}

std::string content(const std::shared_ptr<const SourceText>& source) {
  return source ? source->text : std::string();
}

int adopt_revision(Desk& desk) {
  Faults faults;
  const auto plan = read_plan(desk.told.plan, faults);
  if (!plan) {
    fmt::print(stderr, "{}Nothing was adopted.\n", render(faults));
    return exit_files;
  }
  if (desk.told.earlier != "stand" && desk.told.earlier != "again")
    return fail(usage("what becomes of earlier trials is missing",
                      "--earlier stand: their judgements count on; --earlier again: boards not shipped yet must be "
                      "tried again"));
  Adopting adopting;
  adopting.files = {content(plan->plan.source), content(plan->jig->source_text), content(plan->limits.source)};
  adopting.order = desk.told.order;
  adopting.station = desk.station.name;
  adopting.who = desk.who;
  adopting.second = desk.told.second;
  adopting.reason = desk.told.reason;
  adopting.earlier_stand = desk.told.earlier == "stand";
  adopting.at_us = utc_us();
  const auto made = adopt(desk.db(), desk.uuids(), adopting);
  if (!made) return fail(made.error());
  fmt::print("Revision {} is in force for {}: plan {}, limits {} revision {}. Earlier trials {}.\n",
             made.value().number, desk.told.order.empty() ? "every order" : "order " + printable(desk.told.order),
             plan->plan.id, plan->limits.id, plan->limits.revision,
             adopting.earlier_stand ? "stand" : "no longer count for shipment");
  return exit_go;
}

int revisions(Store& store) {
  const auto all = all_adopted(store.database());
  if (store.database().failed()) return fail(store.database().error());
  for (const Adopted& a : all)
    fmt::print("{:>3}  {}  {:20} {:16} {}\n     plan {:.8}, jig {:.8}, limits {:.8}; earlier trials {}\n", a.number,
               utc_text(a.at_us), a.order.empty() ? "every order" : "order " + printable(a.order), printable(a.who),
               printable(a.reason), a.plan, a.jig, a.limits, a.earlier_stand ? "stand" : "don't count");
  if (all.empty()) fmt::print("No revision was adopted: every plan is played as it stands, and its records say so.\n");
  return exit_go;
}

}  // namespace

struct DeskCommands::Words {
  struct Command {
    CLI::App* app;
    bool by_engineer, with_reason;
    std::function<int(Desk&)> run;
  };
  Told told;
  std::vector<Command> commands;
  CLI::App *holds{}, *people{}, *revisions{};

  CLI::App* add(CLI::App& app, const char* name, const char* help, bool by_engineer, bool with_reason,
                std::function<int(Desk&)> run) {
    CLI::App* out = app.add_subcommand(name, help);
    out->add_option("--by", told.signature.by, "who does this")->required(by_engineer);
    if (by_engineer)
      out->add_option("--password-file", told.signature.password_file,
                      "file whose first line is the engineer's password; - = standard input");
    if (with_reason) out->add_option("--reason", told.reason, "why, for the record")->required();
    commands.push_back({out, by_engineer, with_reason, std::move(run)});
    return out;
  }

  void add_boards(CLI::App* command, bool rules) {
    command->add_option("SERIAL", told.boards.serials, "boards");
    command->add_option("--order", told.boards.order, "every board of this order");
    if (!rules) return;
    command->add_option("--reel", told.boards.reel, "every board that may carry this reel");
    command->add_option("--lot", told.boards.lot, "every board that may carry a reel of this maker's lot");
    command->add_option("--where", told.boards.condition,
                        "boards with such a finding, as in \"under-load.load_delta [1 nF] > 0.2 mV\"");
  }
};

DeskCommands::DeskCommands(CLI::App& app) : words_(std::make_unique<Words>()) {
  Words& w = *words_;
  w.add_boards(w.add(app, "hold", "Hold boards: neither tried nor shipped until released", true, true, hold), true);
  w.add_boards(w.add(app, "release", "Lift the holds on boards: their cause is gone", true, true,
                     [](Desk& d) { return lift(d, "release"); }),
               true);
  w.add_boards(w.add(app, "waive", "Lift the holds on boards although their cause stays", true, true,
                     [](Desk& d) { return lift(d, "waive"); }),
               true);
  w.holds = app.add_subcommand("holds", "List the holds in force");
  w.add_boards(w.add(app, "scrap", "Take boards out for good", true, true, scrap), false);
  w.add_boards(w.add(app, "review", "Let a GO after a NO-GO count", true, true, review), false);
  w.add_boards(w.add(app, "allow", "Let boards be tried once more without a repair", true, true, allow), false);
  CLI::App* shipping = w.add(app, "ship", "Record a shipment; refuses any board that is not fit", false, false, ship);
  w.add_boards(shipping, false);
  shipping->add_option("--to", w.told.to, "the receiver")->required();
  CLI::App* repairing = w.add(app, "repair", "Record a repair", false, true, repair);
  repairing->add_option("SERIAL", w.told.serial, "the board")->required();
  repairing->add_option("--replaced", w.told.designator, "the place, as in U7")->required();
  repairing->add_option("--reel", w.told.reel, "reel of the new part");
  CLI::App* relabelling = w.add(app, "relabel", "Record that a board bears a new label", true, true, relabel);
  relabelling->add_option("SERIAL", w.told.serial, "the board, by any of its labels")->required();
  relabelling->add_option("NEW", w.told.new_serial, "what the new label says")->required();
  CLI::App* reels =
      w.add(app, "reel-change", "Record that a reel serves a place from a board on", false, false, change_reel_at);
  reels->add_option("DESIGNATOR", w.told.designator, "the place, as in U7")->required();
  reels->add_option("REEL", w.told.reel, "the reel's label")->required();
  reels->add_option("--from", w.told.from_serial, "first board with it");
  reels->add_option("--order", w.told.order, "with --from-place: the order");
  reels->add_option("--from-place", w.told.from_build, "first build place with it");
  w.people = app.add_subcommand("people", "List who is registered");
  CLI::App* person = w.add(app, "register", "Register a person, or change a badge or password", true, false,
                           [](Desk& d) { return add_person(d, false); });
  person->add_option("NAME", w.told.name)->required();
  person->add_option("--role", w.told.role, "operator or engineer");
  person->add_option("--badge", w.told.badge, "what the badge's code says");
  person->add_option("--new-password-file", w.told.new_password_file, "the person's password; - = standard input");
  CLI::App* leaving =
      w.add(app, "deregister", "Take a person's rights back", true, false, [](Desk& d) { return add_person(d, true); });
  leaving->add_option("NAME", w.told.name)->required();
  CLI::App* adopting = w.add(app, "adopt", "Put a plan, its jig and its limits in force", true, true, adopt_revision);
  adopting->add_option("PLAN", w.told.plan, "plan file")->required();
  adopting->add_option("--order", w.told.order, "for this order only");
  adopting->add_option("--earlier", w.told.earlier, "earlier trials: \"stand\", or \"again\" before a shipment");
  adopting->add_option("--second", w.told.second, "who approved it beside you");
  w.revisions = app.add_subcommand("revisions", "List the revisions that were adopted");
}

DeskCommands::~DeskCommands() = default;

std::optional<int> DeskCommands::run(const StationFile& station, const std::string& store_path) {
  Words& w = *words_;
  const bool asks = *w.holds || *w.people || *w.revisions;
  const auto named = std::find_if(w.commands.begin(), w.commands.end(), [](const auto& c) { return bool(*c.app); });
  if (!asks && named == w.commands.end()) return std::nullopt;
  StoreOptions options;
  if (asks) options.access = StoreOptions::Access::read;
  options.create = named != w.commands.end() && named->app->get_name() == "register";
  options.backups = station.backups;
  auto store = Store::open(store_path, options);
  if (!store) return fail(store.error());
  tell(store.value()->notice());
  if (*w.holds) return holds(*store.value());
  if (*w.people) return list_people(*store.value());
  if (*w.revisions) return revisions(*store.value());
  Desk desk{*store.value(), station, w.told, w.told.signature.by};
  if (named->by_engineer) {
    const auto who = engineer(desk.db(), w.told.signature);
    if (!who) return fail(who.error());
    desk.who = who.value();
  }
  if (named->with_reason)
    if (const auto reason = need_reason(desk); !reason) return fail(reason.error());
  const int code = named->run(desk);
  store.value()->finish_upkeep();
  for (const std::string& news : store.value()->take_news()) tell(news);
  return code;
}

}  // namespace jigwright
