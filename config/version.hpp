#pragma once

namespace tramline {

#ifndef TRAMLINE_VERSION
#define TRAMLINE_VERSION "0.1.0"
#endif
inline constexpr const char* kVersion = TRAMLINE_VERSION;

}  // namespace tramline
