#include "db/record_copy.hpp"

#include <doctest/doctest.h>

#include "db/digest.hpp"

using namespace jigwright;

namespace {

const std::string store_a(16, 'a'), store_b(16, 'b');

RecordCopy record(std::int64_t seq, const std::string& station = "uuid of bench 1") {
  RecordCopy r;
  r.station_uuid = station;
  r.station = "bench 1";
  r.epoch = 1;
  r.seq = seq;
  r.kind = 4;
  r.uuid = "trial " + std::to_string(seq);
  r.at_us = 1000 * seq;
  r.hash = sha256(r.uuid);
  r.body = std::string(20, static_cast<char>(seq)) + "pdr";
  r.readings = seq % 2 == 0 ? std::string() : std::string("\0readings\n", 10);
  return r;
}

struct Frames {
  std::string bytes;
  std::vector<std::size_t> ends;  ///< of each frame
  void add(const std::string& frame) {
    bytes += frame;
    ends.push_back(bytes.size());
  }
};

Frames frames() {
  Frames out;
  out.add(document_frame({"plan", "plan.toml", "[plan]"}));
  out.add(part_frame("a part"));
  for (std::int64_t seq = 1; seq <= 3; ++seq) out.add(record_frame(record(seq)));
  out.add(part_frame(""));
  out.add(record_frame(record(4)));
  return out;
}

std::int64_t records(const CopySet& set) {
  std::int64_t out = 0;
  for (const auto& [uuid, chain] : set.chains) out += static_cast<std::int64_t>(chain.size());
  return out;
}

}  // namespace

TEST_CASE("frames give back what went in") {
  CopySet set;
  const Frames all = frames();
  CHECK(read_frames(all.bytes, set) == all.bytes.size());
  CHECK(set.parts.at(sha256("a part")) == "a part");
  CHECK(set.parts.at(sha256("")).empty());
  const Document& document = set.documents.at(sha256("[plan]"));
  CHECK(document.kind == "plan");
  CHECK(document.name == "plan.toml");
  CHECK(document.text == "[plan]");
  const auto& chain = set.chains.at("uuid of bench 1");
  REQUIRE(chain.size() == 4);
  std::int64_t seq = 0;
  for (const auto& [at, read] : chain) {
    const RecordCopy expected = record(++seq);
    CHECK(at.first == ChainPlace{1, seq});
    CHECK(read.station == "bench 1");
    CHECK(read.kind == 4);
    CHECK(read.uuid == expected.uuid);
    CHECK(read.at_us == expected.at_us);
    CHECK(read.hash == expected.hash);
    CHECK(read.body == expected.body);
    CHECK(read.readings == expected.readings);
  }
}

TEST_CASE("a file cut off at any byte yields its whole frames, to reader and index alike") {
  const Frames all = frames();
  for (std::size_t length = 0; length <= all.bytes.size(); ++length) {
    CAPTURE(length);
    std::size_t whole = 0;
    for (std::size_t end : all.ends)
      if (end <= length) whole = end;
    const std::string cut = all.bytes.substr(0, length);
    CopySet set;
    CopyIndex index;
    CHECK(read_frames(cut, set) == whole);
    CHECK(index_frames(cut, index) == whole);
    const FramesRead read = read_all_frames(cut, set);
    CHECK(read.end == whole);
    CHECK(read.skipped == 0);
    std::int64_t indexed = 0;
    for (const auto& [uuid, chain] : index.chains) indexed += static_cast<std::int64_t>(chain.size());
    CHECK(indexed == records(set));
    CHECK(index.held.size() == set.parts.size() + set.documents.size());
  }
}

TEST_CASE("one changed byte ends the walk at its frame; whoever reads on loses that frame alone") {
  const Frames all = frames();
  for (std::size_t at = 0; at < all.bytes.size(); ++at) {
    CAPTURE(at);
    std::string bytes = all.bytes;
    bytes[at] = static_cast<char>(bytes[at] ^ 1);
    std::size_t before = 0, behind = 0, frame = 0;
    for (std::size_t end : all.ends) {
      behind = end;
      if (end > at) break;
      before = end;
      ++frame;
    }
    CopySet set, rest;
    CHECK(read_frames(bytes, set) == before);
    const FramesRead read = read_all_frames(bytes, rest);
    const bool last = behind == all.bytes.size();
    CHECK(read.end == (last ? before : all.bytes.size()));
    CHECK(read.skipped == (last ? 0 : behind - before));
    const bool of_record = (frame >= 2 && frame <= 4) || frame == 6;
    CHECK(records(rest) == (of_record ? 3 : 4));
  }
}

TEST_CASE("the head tells whose copies these are") {
  const std::string head = copies_head(store_a);
  CHECK(head == "jigwright records 1 61616161616161616161616161616161\n");
  CHECK(head_length(head + "more", store_a) == head.size());
  CHECK(head_length(head, "") == head.size());
  CHECK(!head_length(head, store_b));
  for (std::size_t length = 0; length < head.size(); ++length) CHECK(!head_length(head.substr(0, length), store_a));
  CHECK(!head_length("jigwright records 2 61616161616161616161616161616161\n", ""));
}

TEST_CASE("a record that stands in two files is held once; two of one place are both held") {
  CopySet set;
  RecordCopy again = record(1), other = record(1);
  again.readings.clear();  // archived away in between
  other.hash = sha256("another");
  read_frames(record_frame(record(1)), set);
  read_frames(record_frame(again) + record_frame(other), set);
  CHECK(records(set) == 2);
  CHECK(set.chains.at("uuid of bench 1").at({ChainPlace{1, 1}, again.hash}).readings == record(1).readings);
}
