#include <doctest/doctest.h>
#include <unistd.h>

#include <boost/asio/co_spawn.hpp>
#include <boost/asio/detached.hpp>
#include <optional>

#include "station/watch.hpp"

using namespace jigwright;
using namespace std::chrono_literals;

TEST_CASE("a question that nobody answers ends at its deadline, and is no answer") {
  // Standard input stays open and silent.
  int ends[2];
  REQUIRE(::pipe(ends) == 0);
  const int kept = ::dup(STDIN_FILENO);
  REQUIRE(::dup2(ends[0], STDIN_FILENO) == STDIN_FILENO);
  asio::io_context io{1};
  const auto clock = make_real_clock(io);
  const auto person = make_person(io, *clock, {}, true, false);
  Ask question;
  question.step = "lamp";
  question.question = "Is the lamp lit?";
  std::optional<Result<Reading>> answer;
  auto one = [&]() -> Task<void> { answer.emplace(co_await person->ask(1, question, clock->now() + 30ms)); };
  asio::co_spawn(io, one(), asio::detached);
  clock->run(io);
  ::dup2(kept, STDIN_FILENO);
  for (const int fd : {kept, ends[0], ends[1]}) ::close(fd);
  REQUIRE(answer.has_value());
  REQUIRE_FALSE(answer->ok());
  CHECK(answer->error().kind == Error::Kind::person);
}
