#include "probe/hdf5_error.h"

#include <hdf5.h>

namespace bentlight::probe {

namespace {

herr_t take_first(unsigned, const H5E_error2_t* entry, void* out) {
  auto& text = *static_cast<std::string*>(out);
  if (text.empty() && entry->desc != nullptr) text = entry->desc;
  return 0;
}

}  // namespace

std::string library_fault() {
  std::string text;
  // Upwards: from where the fault arose to the call that we made.
  H5Ewalk2(H5E_DEFAULT, H5E_WALK_UPWARD, take_first, &text);
  H5Eclear2(H5E_DEFAULT);
  return text;
}

std::string with_library_fault(const std::string& what) {
  const std::string fault = library_fault();
  return fault.empty() ? what : what + ": " + fault;
}

}  // namespace bentlight::probe
