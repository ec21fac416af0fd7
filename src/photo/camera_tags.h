#pragma once

#include <string_view>

#include "photo/photo.h"

namespace laygauge {

// The camera's tags in the bytes of an image file. Tags that are absent, damaged or nonsense are
// left out: a photo is never refused for its tags.
[[nodiscard]] CameraTags ReadCameraTags(std::string_view image_bytes);

}  // namespace laygauge
