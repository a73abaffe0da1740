// The store's answers as a person or a program reads them: an aligned table under a plain sentence, CSV (RFC 4180,
// with cells that a spreadsheet would take for formulas made safe), or one JSON document. Pure text; any thread.
#pragma once
#include <string>
#include <vector>

#include "db/enter.hpp"
#include "db/questions.hpp"

namespace jigwright {

enum class Form { table, csv, json };

/// The reels that a board carries: a line each.
std::string render(const SerialTrace& trace, Form form);

/// The boards that carry a reel: a line each, counts of their judgements below.
std::string render(const ReelTrace& trace, Form form);

/// A board's record. Table: its trials, then the findings of the latest ended one, least room first. CSV: a line a
/// finding of every trial; a trial without findings has one line of its own. JSON: everything.
std::string render(const BoardShown& shown, Form form);

/// "boards.csv: 240 boards, all new"; the last line says so when nothing was new.
std::string render(const std::vector<EnteredFile>& entered);

}  // namespace jigwright
