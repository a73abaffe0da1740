// The person at the station, who answers a plan's questions.
#include <fmt/format.h>
#include <unistd.h>

#include <boost/asio/posix/basic_stream_descriptor.hpp>
#include <boost/asio/read_until.hpp>
#include <boost/asio/redirect_error.hpp>
#include <boost/asio/steady_timer.hpp>
#include <boost/asio/streambuf.hpp>
#include <boost/asio/use_awaitable.hpp>
#include <charconv>
#include <istream>
#include <nlohmann/json.hpp>

#include "station/watch.hpp"

namespace jigwright {
namespace {

using Json = nlohmann::ordered_json;
using Await = asio::use_awaitable_t<Exec>;

/// Yes or no in the words that people type; else a number, with or without the unit.
std::optional<double> understood(std::string text, const Ask& question) {
  while (!text.empty() && (text.back() == '\n' || text.back() == '\r' || text.back() == ' ')) text.pop_back();
  if (question.yes_no) {
    for (char& c : text) c = static_cast<char>(std::tolower(static_cast<unsigned char>(c)));
    if (text == "yes" || text == "y" || text == "true" || text == "1") return 1.0;
    if (text == "no" || text == "n" || text == "false" || text == "0") return 0.0;
    return std::nullopt;
  }
  if (const auto value = parse_quantity(text, question.unit); value.ok()) return value.value();
  if (const auto plain = parse_quantity(text); plain.ok() && plain.value().unit == Unit::count)
    return plain.value().value;
  return std::nullopt;
}

/// The answer of a line {"answer": ...}.
std::optional<double> from_json(const std::string& line, const Ask& question) {
  const Json parsed = Json::parse(line, nullptr, false);
  if (!parsed.is_object() || !parsed.contains("answer")) return std::nullopt;
  const Json& answer = parsed["answer"];
  if (answer.is_boolean() && question.yes_no) return answer.get<bool>() ? 1.0 : 0.0;
  if (answer.is_number() && !question.yes_no) return answer.get<double>();
  if (answer.is_string()) return understood(answer.get<std::string>(), question);
  return std::nullopt;
}

class StationPerson final : public Person {
 public:
  StationPerson(asio::io_context& io, Clock& clock, std::vector<std::pair<std::string, std::string>> answers, bool json,
                bool terminal)
      : clock_(clock), answers_(std::move(answers)), json_(json), terminal_(terminal), input_(io), patience_(io) {}

  Task<Result<Reading>> ask(int nest, const Ask& question, Duration deadline) override {
    for (const auto& [step, answer] : answers_) {
      if (step != question.step) continue;
      const auto value = understood(answer, question);
      if (!value)
        co_return Error{Error::Kind::usage, fmt::format("\"{}\" does not answer \"{}\"", answer, question.question),
                        "--answer " + step, wanted(question)};
      co_return answered(*value);
    }
    if (!json_ && !terminal_)
      co_return Error{Error::Kind::person, fmt::format("nobody is here to answer \"{}\"", question.question),
                      "step " + question.step,
                      fmt::format("give --answer {}=..., or run it on a terminal", question.step)};
    co_return co_await converse(nest, question, deadline);
  }

  void stop() override {
    stopped_ = true;
    if (input_.is_open()) input_.cancel();
  }

 private:
  static std::string wanted(const Ask& q) {
    if (q.yes_no) return "answer yes or no";
    return fmt::format("answer with {}, {} to {}", quantity_name(q.unit), format_quantity(q.low, q.unit),
                       format_quantity(q.high, q.unit));
  }

  Reading answered(double value) const {
    Reading r;
    r.value = value;
    r.at = clock_.now();
    r.state = ReadingState::ok;
    return r;
  }

  void put(int nest, const Ask& q) {
    if (json_) {
      Json out{{"event", "question"},
               {"nest", nest},
               {"step", q.step},
               {"question", q.question},
               {"kind", q.yes_no ? "yes_no" : "value"}};
      if (!q.yes_no) out.update({{"low", q.low}, {"high", q.high}, {"unit", symbol(q.unit)}});
      fmt::print("{}\n", out.dump(-1, ' ', false, Json::error_handler_t::replace));
    } else {
      fmt::print("\n{}  ({}) ", printable(q.question), wanted(q));
    }
    std::fflush(stdout);
  }

  /// Patience is the computer's own time: virtual time stands still meanwhile.
  void arm(Duration deadline) {
    patience_.expires_after(deadline - clock_.now());
    patience_.async_wait([this](const boost::system::error_code& fault) {
      if (!fault) input_.cancel();
    });
  }

  Task<Result<Reading>> converse(int nest, const Ask& question, Duration deadline) {
    const Error nobody{
        Error::Kind::person, fmt::format("no answer to \"{}\"", question.question), "step " + question.step, {}};
    // Virtual time stands still while a person thinks.
    const Clock::Hold hold(clock_);
    if (!input_.is_open()) input_.assign(::dup(STDIN_FILENO));
    arm(deadline);
    for (int attempt = 0; attempt < 3 && !stopped_; ++attempt) {
      put(nest, question);
      boost::system::error_code fault;
      const Await token{};
      co_await asio::async_read_until(input_, buffer_, '\n', asio::redirect_error(token, fault));
      std::istream in(&buffer_);
      std::string line;
      std::getline(in, line);
      if (fault && line.empty()) break;
      const auto value = json_ ? from_json(line, question) : understood(line, question);
      if (value) {
        patience_.cancel();
        co_return answered(*value);
      }
      if (!json_) fmt::print("That was not understood. ");
    }
    patience_.cancel();
    co_return nobody;
  }

  Clock& clock_;
  std::vector<std::pair<std::string, std::string>> answers_;
  bool json_;
  bool terminal_;
  asio::posix::basic_stream_descriptor<Exec> input_;
  asio::basic_waitable_timer<std::chrono::steady_clock, asio::wait_traits<std::chrono::steady_clock>, Exec> patience_;
  asio::streambuf buffer_{4096};
  bool stopped_{false};
};

}  // namespace

std::unique_ptr<Person> make_person(asio::io_context& io, Clock& clock,
                                    std::vector<std::pair<std::string, std::string>> answers, bool json,
                                    bool terminal) {
  return std::make_unique<StationPerson>(io, clock, std::move(answers), json, terminal);
}

}  // namespace jigwright
