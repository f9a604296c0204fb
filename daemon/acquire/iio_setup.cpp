#include "daemon/acquire/iio_setup.hpp"

#include <algorithm>
#include <cerrno>
#include <cmath>
#include <cstdio>
#include <cstring>
#include <optional>
#include <system_error>

#include "daemon/acquire/byte_reader.hpp"

namespace tramline::acquire {
namespace {

constexpr const char* kRate = "sampling_frequency";
constexpr const char* kRates = "sampling_frequency_available";
constexpr double kSameRate = 1e-6;  // as a share; attributes have six decimals

std::string plain(double number) {
  char text[32];
  // Attributes that hold whole numbers refuse a decimal point.
  if (number == std::floor(number) && std::abs(number) < 1e15) {
    std::snprintf(text, sizeof text, "%.0f", number);
  } else {
    std::snprintf(text, sizeof text, "%.6f", number);
  }
  return text;
}

std::string listed(const std::vector<std::string>& names) {
  std::string all;
  for (const std::string& name : names)
    all += (all.empty() ? "" : ", ") + name;
  return all.empty() ? "none" : all;
}

/// One attribute that holds a sample rate.
struct RateAttribute {
  const iio_device* device = nullptr;
  const iio_channel* channel = nullptr;  ///< if set, it is the channel's
  bool of_buffer = false;

  [[nodiscard]] int read(double& hz) const {
    if (channel != nullptr) return iio_channel_attr_read_double(channel, kRate, &hz);
    if (of_buffer) return iio_device_buffer_attr_read_double(device, kRate, &hz);
    return iio_device_attr_read_double(device, kRate, &hz);
  }
  [[nodiscard]] int write(double hz) const {
    const std::string text = plain(hz);
    const auto written = channel != nullptr ? iio_channel_attr_write(channel, kRate, text.c_str())
                         : of_buffer        ? iio_device_buffer_attr_write(device, kRate, text.c_str())
                                            : iio_device_attr_write(device, kRate, text.c_str());
    return written < 0 ? static_cast<int>(written) : 0;
  }
  [[nodiscard]] std::string allowed() const {
    char text[1024] = "";
    const auto size = channel != nullptr ? iio_channel_attr_read(channel, kRates, text, sizeof text)
                      : of_buffer        ? iio_device_buffer_attr_read(device, kRates, text, sizeof text)
                                         : iio_device_attr_read(device, kRates, text, sizeof text);
    if (size <= 0) return "";
    text[sizeof text - 1] = '\0';
    std::string line = text;
    while (!line.empty() && (line.back() == '\n' || line.back() == ' '))
      line.pop_back();
    return displayable(line);
  }
};

std::vector<RateAttribute> rate_attributes(const iio_device* device,
                                           const std::vector<iio_channel*>& captured) {
  const iio_device* trigger = trigger_of(device);
  if (trigger != nullptr && iio_device_find_attr(trigger, kRate) != nullptr)
    return {{trigger, nullptr, false}};
  if (iio_device_find_attr(device, kRate) != nullptr) return {{device, nullptr, false}};
  if (iio_device_find_buffer_attr(device, kRate) != nullptr) return {{device, nullptr, true}};
  std::vector<RateAttribute> found;
  for (const iio_channel* channel : captured) {
    if (iio_channel_find_attr(channel, kRate) != nullptr) found.push_back({device, channel, false});
  }
  return found;
}

Status set_rate(const RateAttribute& attribute, double wanted_hz, const IioPlace& place) {
  double stands_hz = 0.0;
  if (attribute.read(stands_hz) == 0 && std::abs(stands_hz / wanted_hz - 1.0) < kSameRate) return kDone;
  const int error = -attribute.write(wanted_hz);
  if (error == 0) return kDone;
  const std::string what = "a rate of " + plain(wanted_hz) + " Hz cannot be set";
  if (error != EINVAL && error != ERANGE) return iio_trouble(place, what, error);
  const std::string allowed = attribute.allowed();
  return Error{place.text(), what,
               allowed.empty()
                   ? "leave source.rate_hz out to take it as it stands, " + plain(stands_hz) + " Hz"
                   : "it can be set to " + allowed};
}

}  // namespace

Error iio_trouble(const IioPlace& place, const std::string& what, int error) {
  std::string remedy;
  switch (error) {
    case EACCES:
    case EPERM:
      remedy = place.local()
                   ? R"(give the daemon's user the right by a udev rule, SUBSYSTEM=="iio", )"
                     R"(GROUP="tramline", MODE="0660", and make its attributes under /sys writable )"
                     "by that group"
                   : "let the libiio server there run as a user who has the right";
      break;
    case EBUSY:
      remedy = "another program captures from it: stop that one";
      break;
    case ENODEV:
    case ENXIO:
    case EIO:
    case EBADF:
      remedy = "see that the converter is plugged in and its driver loaded";
      break;
    case EPIPE:
    case ECONNRESET:
    case ECONNREFUSED:
    case ENOTCONN:
    case EHOSTUNREACH:
    case ENETUNREACH:
      remedy = "see that the libiio server (iiod) runs there and the network carries";
      break;
    case ETIMEDOUT:
      remedy = place.local() ? "see that its trigger fires"
                             : "see that its trigger fires, and that the network carries";
      break;
    default:
      break;
  }
  return {place.text(), what + ": " + std::generic_category().message(error), remedy};
}

std::string name_of(const iio_device* device) {
  const char* id = iio_device_get_id(device);
  const char* name = iio_device_get_name(device);
  if (name == nullptr || *name == '\0') return displayable(id);
  return displayable(name) + " (" + displayable(id) + ")";
}

Result<const iio_device*> find_converter(const iio_context* context, const std::string& wanted,
                                         const IioPlace& place) {
  std::vector<std::string> names;
  for (unsigned i = 0; i < iio_context_get_devices_count(context); ++i) {
    const iio_device* device = iio_context_get_device(context, i);
    if (iio_device_is_trigger(device) || iio_device_is_hwmon(device)) continue;
    for (const char* known :
         {iio_device_get_id(device), iio_device_get_name(device), iio_device_get_label(device)}) {
      if (known == nullptr || wanted != known) continue;
      if (inputs_of(device).empty()) {
        return Error{place.text(), name_of(device) + " has no channel that can be captured through a buffer",
                     "its driver must support buffered capture; see that the kernel has it built in"};
      }
      return device;
    }
    names.push_back(name_of(device));
  }
  return Error{place.text(), "there is no converter called \"" + displayable(wanted) + "\"",
               names.empty() ? "there is none at all: see that it is plugged in and its driver loaded"
                             : "there are: " + listed(names)};
}

std::vector<iio_channel*> inputs_of(const iio_device* device) {
  std::vector<iio_channel*> inputs;
  for (unsigned i = 0; i < iio_device_get_channels_count(device); ++i) {
    iio_channel* channel = iio_device_get_channel(device, i);
    if (iio_channel_is_scan_element(channel) && !iio_channel_is_output(channel) &&
        iio_channel_get_type(channel) != IIO_TIMESTAMP)
      inputs.push_back(channel);
  }
  std::stable_sort(inputs.begin(), inputs.end(), [](const iio_channel* a, const iio_channel* b) {
    return iio_channel_get_index(a) < iio_channel_get_index(b);
  });
  return inputs;
}

iio_channel* stamp_channel_of(const iio_device* device) {
  for (unsigned i = 0; i < iio_device_get_channels_count(device); ++i) {
    iio_channel* channel = iio_device_get_channel(device, i);
    if (iio_channel_is_scan_element(channel) && iio_channel_get_type(channel) == IIO_TIMESTAMP)
      return channel;
  }
  return nullptr;
}

Status choose_trigger(const iio_device* device, const std::string& wanted, const IioPlace& place) {
  const iio_context* context = iio_device_get_context(device);
  const iio_device* trigger = iio_context_find_device(context, wanted.c_str());
  if (trigger == nullptr || !iio_device_is_trigger(trigger)) {
    return Error{place.text(), "there is no trigger called \"" + displayable(wanted) + "\"",
                 "there are: " + triggers_in(context)};
  }
  if (trigger_of(device) == trigger) return kDone;
  const int error = -iio_device_set_trigger(device, trigger);
  if (error == 0) return kDone;
  if (error == EINVAL || error == ENOENT || error == ENODEV) {
    return Error{place.text(), "it does not take the trigger " + name_of(trigger),
                 "leave source.trigger out, or name another; there are: " + triggers_in(context)};
  }
  return iio_trouble(place, "the trigger " + name_of(trigger) + " cannot be chosen", error);
}

const iio_device* trigger_of(const iio_device* device) {
  const iio_device* trigger = nullptr;
  return iio_device_get_trigger(device, &trigger) == 0 ? trigger : nullptr;
}

std::string triggers_in(const iio_context* context) {
  std::vector<std::string> names;
  for (unsigned i = 0; i < iio_context_get_devices_count(context); ++i) {
    const iio_device* device = iio_context_get_device(context, i);
    if (iio_device_is_trigger(device)) names.push_back(name_of(device));
  }
  return listed(names);
}

Result<double> settle_rate(const iio_device* device, const std::vector<iio_channel*>& captured,
                           double wanted_hz, const IioPlace& place, std::vector<std::string>& remarks) {
  const std::vector<RateAttribute> attributes = rate_attributes(device, captured);
  if (attributes.empty()) {
    if (wanted_hz <= 0.0)
      return Error{place.text(), "it does not say its sample rate",
                   "give source.rate_hz: what its trigger makes it"};
    remarks.push_back("the converter does not say its sample rate; that of the site file is taken");
    return wanted_hz;
  }
  std::optional<double> rate_hz;
  for (const RateAttribute& attribute : attributes) {
    if (wanted_hz > 0.0) {
      if (auto set = set_rate(attribute, wanted_hz, place); !set) return set.error();
    }
  }
  for (const RateAttribute& attribute : attributes) {
    double hz = 0.0;
    if (const int error = -attribute.read(hz); error != 0)
      return iio_trouble(place, "its sample rate cannot be read", error);
    if (rate_hz && std::abs(hz - *rate_hz) > kSameRate * *rate_hz) {
      return Error{
          place.text(),
          "its channels have different sample rates, " + plain(*rate_hz) + " and " + plain(hz) + " Hz",
          "give source.rate_hz"};
    }
    if (!rate_hz) rate_hz = hz;
  }
  if (wanted_hz > 0.0 && std::abs(*rate_hz - wanted_hz) > kSameRate * wanted_hz) {
    remarks.push_back("the converter made " + plain(*rate_hz) + " Hz of the " + plain(wanted_hz) +
                      " Hz it was asked for");
  }
  return *rate_hz;
}

}  // namespace tramline::acquire
