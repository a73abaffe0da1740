// The nearest known word to a misspelt one, for messages.
#pragma once
#include <optional>
#include <span>
#include <string>
#include <string_view>

namespace jigwright {

/// Levenshtein distance with adjacent transpositions counted once (optimal string alignment), case ignored.
int edit_distance(std::string_view a, std::string_view b);

/// The known word with the least distance (one that differs by spaces and case alone comes first), if that is at most a
/// third of the longer length (and at least 1 allowed).
std::optional<std::string> nearest(std::string_view word, std::span<const std::string> known);

/// "a, b, c": for lists of known words in messages; "none" for an empty one.
std::string listed(std::span<const std::string> words);

}  // namespace jigwright
