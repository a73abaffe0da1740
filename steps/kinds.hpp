// How each kind of step is read from its table of the plan: one function a file of this room. The table that lists them
// is in kinds.cpp. Faults go to the reader; what comes back after a fault expands to nothing.
#pragma once
#include <memory>

#include "steps/step.hpp"

namespace jigwright {

std::unique_ptr<Step> read_known_value(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_contact(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_identity(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_power_up(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_supply_current(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_offset(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_gain(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_offset_under_load(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_question(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_relay_check(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_path_zero(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_source_check(TableReader& reader, const StepContext& context);
std::unique_ptr<Step> read_load_check(TableReader& reader, const StepContext& context);

}  // namespace jigwright
