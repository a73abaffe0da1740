// What the program's exit code says. Never renumbered.
#pragma once

namespace jigwright {

enum ExitCode : int {
  exit_go = 0,       ///< GO (every board of an order), or the command is done
  exit_no_go = 1,    ///< at least one NO-GO
  exit_void = 2,     ///< no NO-GO, at least one VOID
  exit_files = 3,    ///< faults in plan, jig, limits, station or CSV files; nothing was done
  exit_usage = 4,    ///< the command's words are off
  exit_store = 5,    ///< the store can't record or answer
  exit_stopped = 6,  ///< ended by a person before all boards were tried
  exit_fault = 7,    ///< anything else
};

}  // namespace jigwright
