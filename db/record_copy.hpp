// Copies of records outside the store: a file of frames, each a whole record with what it names, from which the record
// can be written into another store, there to bear the same hash. docs/store.md lays the file out. What is read is
// trusted as far as its hashes go. Plain bytes, no SQL; any thread.
#pragma once
#include <cstdint>
#include <map>
#include <optional>
#include <string>
#include <string_view>
#include <unordered_map>
#include <unordered_set>
#include <utility>

#include "base/error.hpp"
#include "db/trial_record.hpp"

namespace jigwright {

struct RecordCopy {
  std::string station_uuid, station;  ///< bytes; name
  std::int64_t epoch{}, seq{}, kind{};
  std::string uuid;
  std::int64_t at_us{};
  std::string hash;      ///< as it stood in its chain
  std::string body;      ///< canonical bytes
  std::string readings;  ///< raw readings of a trial; empty where they were archived away
};

/// Where in its chain a record stands; in a chain's order.
struct ChainPlace {
  std::int64_t epoch{}, seq{};
  auto operator<=>(const ChainPlace&) const = default;
};

/// What files of copies hold. A record that stands in two of them is held once; two records of one place (a chain that
/// was begun anew from an older backup) are both held.
struct CopySet {
  using Chain = std::map<std::pair<ChainPlace, std::string>, RecordCopy>;  ///< by place and hash
  std::map<std::string, Chain> chains;                                     ///< by the station's uuid
  std::unordered_map<std::string, std::string> parts;                      ///< by SHA-256
  std::unordered_map<std::string, Document> documents;                     ///< by the SHA-256 of their text
};

/// The first line of a file of copies.
std::string copies_head(std::string_view store_uuid);

/// Frames to append.
std::string part_frame(std::string_view bytes);
std::string document_frame(const Document& document);
std::string record_frame(const RecordCopy& record);

/// What is known of a file that is being written: which records, parts and documents it has.
struct CopyIndex {
  using Chain = std::map<ChainPlace, std::unordered_set<std::string>>;  ///< hashes
  std::map<std::string, Chain> chains;                                  ///< by the station's uuid
  std::unordered_set<std::string> held;                                 ///< parts and documents, by SHA-256
};

/// Reads frames from the front of `bytes`, which stand behind a head or behind a frame.
/// @return how many bytes of whole, sound frames: a file that was cut off ends behind them
std::size_t index_frames(std::string_view bytes, CopyIndex& index);
std::size_t read_frames(std::string_view bytes, CopySet& set);

/// The same, and goes on with the next sound frame behind bytes that are none.
struct FramesRead {
  std::size_t end{};      ///< where the last sound frame ends: what stands behind it was cut off
  std::size_t skipped{};  ///< bytes before it that are no frames: the file is damaged
};
FramesRead index_all_frames(std::string_view bytes, CopyIndex& index);
FramesRead read_all_frames(std::string_view bytes, CopySet& set);

/// Length of the head; nullopt when the bytes do not begin with the head of copies of this store.
/// @param store_uuid  empty = of any store
std::optional<std::size_t> head_length(std::string_view bytes, std::string_view store_uuid);

}  // namespace jigwright
