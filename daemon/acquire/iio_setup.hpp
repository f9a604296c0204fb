#pragma once

#include <iio.h>

#include <string>
#include <vector>

#include "config/result.hpp"

namespace tramline::acquire {

/// Where a converter is, for messages and for what to do about them.
struct IioPlace {
  std::string uri;
  std::string device;  ///< "ad7606 (iio:device0)", once it is known
  [[nodiscard]] std::string text() const { return device.empty() ? uri : device + " on " + uri; }
  [[nodiscard]] bool local() const { return uri.starts_with("local:"); }
};

/// `what` failed at `place` with the errno `error`: says what that means there and what to do.
[[nodiscard]] Error iio_trouble(const IioPlace& place, const std::string& what, int error);

/// "ad7606 (iio:device0)"
[[nodiscard]] std::string name_of(const iio_device* device);

/// The converter called `wanted` (name, label or id). An Error lists those that there are.
[[nodiscard]] Result<const iio_device*> find_converter(const iio_context* context, const std::string& wanted,
                                                       const IioPlace& place);

/// The channels that can be captured, by their order in the scan; without the time stamp.
[[nodiscard]] std::vector<iio_channel*> inputs_of(const iio_device* device);
/// nullptr: the converter stamps no scans.
[[nodiscard]] iio_channel* stamp_channel_of(const iio_device* device);

/// Lets the trigger called `wanted` (name or id) start the scans.
[[nodiscard]] Status choose_trigger(const iio_device* device, const std::string& wanted,
                                    const IioPlace& place);
/// The trigger that starts the scans; nullptr: none, or the converter starts them itself.
[[nodiscard]] const iio_device* trigger_of(const iio_device* device);
/// "sysfstrig0 (trigger0), …", or "none".
[[nodiscard]] std::string triggers_in(const iio_context* context);

/// Sets `wanted_hz`, unless it is 0, and gives the rate read back, with a remark where the two differ. The
/// rate is that of the trigger if it has one, since there is one scan each time it fires; else that of the
/// converter, its buffer or the channels `captured`.
[[nodiscard]] Result<double> settle_rate(const iio_device* device, const std::vector<iio_channel*>& captured,
                                         double wanted_hz, const IioPlace& place,
                                         std::vector<std::string>& remarks);

}  // namespace tramline::acquire
