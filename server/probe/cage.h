// The cage: what the process that parses foreign files may not do.
#pragma once

#include "base/error.h"

namespace bentlight::probe {

/// Gives up everything that parsing does not need, for good: memory and time beyond the limits, new
/// descriptors, writing to files, privileges, and every system call but those that read, map memory and end
/// the process. Opening, the network, other processes and programs are refused with EPERM from then on.
///
///   errors  internal when the kernel grants no part of it: then no file may be parsed
Expected<void> enter_cage();

}  // namespace bentlight::probe
