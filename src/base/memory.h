#pragma once

namespace laygauge {

// For a program's start: keeps memory that is freed for what is needed next. Pictures of a few
// megabytes are made and dropped all the time; memory that is given back to the system in between
// has to be cleared and mapped anew, a tenth of the program's time. Memory comes in large pages
// where the system has them: by small ones its first coming would be a twelfth of the time.
void KeepFreedMemory();

}  // namespace laygauge
