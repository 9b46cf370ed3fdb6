// The HDF5 library's error stack as one sentence.
#pragma once

#include <string>

namespace bentlight::probe {

/// What the library said where the fault arose: the innermost entry of its error stack, without its source
/// locations. Empty when it said nothing. Clears the stack.
std::string library_fault();

/// `what`, and after a colon what the library said, if anything.
std::string with_library_fault(const std::string& what);

}  // namespace bentlight::probe
