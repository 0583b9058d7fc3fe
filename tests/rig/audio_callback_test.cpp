// The audio thread's code runs where any system call ends the process (seccomp), with the allocator and the
// mutexes intercepted: it must pass, and code that does what it must not has to be caught by the same means.
#include "audio_callback.h"

#include <atomic>
#include <chrono>
#include <cstdio>
#include <cstdlib>
#include <functional>
#include <mutex>
#include <numbers>
#include <stdexcept>

#include <gtest/gtest.h>

#if defined(__SANITIZE_ADDRESS__) || defined(__SANITIZE_THREAD__)
#define COLDPIN_SANITIZED 1  // sanitizers bring an allocator and system calls of their own
#else
#define COLDPIN_SANITIZED 0
#endif

#if defined(__linux__) && !COLDPIN_SANITIZED
#include <dlfcn.h>
#include <linux/filter.h>
#include <linux/seccomp.h>
#include <pthread.h>
#include <stddef.h>
#include <sys/prctl.h>
#include <sys/syscall.h>
#include <sys/wait.h>
#include <unistd.h>

namespace {
std::atomic<bool> watching{false};
std::atomic<int> allocations{0}, locks{0};
}  // namespace

// glibc's own entry points, wrapped: what is called while `watching` is counted.
extern "C" {
void* __libc_malloc(size_t);
void __libc_free(void*);
void* malloc(size_t size) {
    if (watching) ++allocations;
    return __libc_malloc(size);
}
void free(void* memory) {
    if (watching && memory != nullptr) ++allocations;
    __libc_free(memory);
}
int pthread_mutex_lock(pthread_mutex_t* mutex) {
    using Lock = int (*)(pthread_mutex_t*);
    static const auto real = reinterpret_cast<Lock>(dlsym(RTLD_NEXT, "pthread_mutex_lock"));
    if (watching) ++locks;
    return real(mutex);
}
}

namespace coldpin::rig {
namespace {

constexpr int clean = 0, allocated = 10, locked = 11, threw = 12;

// Only leaving is allowed from here on; anything else ends the process with SIGSYS.
void forbid_system_calls() {
    sock_filter filter[] = {BPF_STMT(BPF_LD | BPF_W | BPF_ABS, offsetof(seccomp_data, nr)),
                            BPF_JUMP(BPF_JMP | BPF_JEQ | BPF_K, SYS_exit, 1, 0),
                            BPF_JUMP(BPF_JMP | BPF_JEQ | BPF_K, SYS_exit_group, 0, 1),
                            BPF_STMT(BPF_RET | BPF_K, SECCOMP_RET_ALLOW),
                            BPF_STMT(BPF_RET | BPF_K, SECCOMP_RET_KILL_PROCESS)};
    sock_fprog program{static_cast<unsigned short>(std::size(filter)), filter};
    prctl(PR_SET_NO_NEW_PRIVS, 1, 0, 0, 0);
    if (prctl(PR_SET_SECCOMP, SECCOMP_MODE_FILTER, &program) != 0) _exit(99);
}

// Runs `work` in a child under watch; what came of it.
struct Verdict {
    bool system_call = false;
    int status = -1;
};
Verdict watched(const std::function<void()>& work) {
    { const std::lock_guard warm(*std::make_unique<std::mutex>()); }  // dlsym of the wrapper happens here
    const pid_t child = fork();
    if (child == 0) {
        forbid_system_calls();
        watching = true;
        int status = clean;
        try {
            work();
        } catch (...) {
            status = threw;
        }
        watching = false;
        if (status == clean && allocations > 0) status = allocated;
        if (status == clean && locks > 0) status = locked;
        syscall(SYS_exit_group, status);
    }
    int raw = 0;
    waitpid(child, &raw, 0);
    Verdict verdict;
    verdict.system_call = WIFSIGNALED(raw) && WTERMSIG(raw) == SIGSYS;
    verdict.status = WIFEXITED(raw) ? WEXITSTATUS(raw) : -1;
    return verdict;
}

AudioExchange exchange_at_192_khz(double length_s) {
    const auto frames = static_cast<std::size_t>(length_s * 192000.0);
    return {std::vector<std::vector<float>>(2, std::vector<float>(frames, 0.25F)), 2, 192000.0};
}

void drive(AudioExchange& exchange, std::size_t blocks, std::size_t block) {
    static float memory[4][4096];
    const float* in[2] = {memory[0], memory[1]};
    float* out[2] = {memory[2], memory[3]};
    for (std::size_t b = 0; b < blocks; ++b) exchange_block(exchange, in, out, block, b % 7 == 0 ? 6U : 0U);
}

TEST(AudioCallbackTest, NeitherAllocatesLocksCallsTheSystemNorThrowsAt64FramesAnd192Kilohertz) {
    auto exchange = exchange_at_192_khz(5.0);
    const Verdict verdict = watched([&] { drive(exchange, 20000, 64); });  // past its end, flags and all
    EXPECT_FALSE(verdict.system_call);
    EXPECT_EQ(verdict.status, clean);
    auto stopped = exchange_at_192_khz(5.0);
    EXPECT_EQ(watched([&] {
                  drive(stopped, 100, 64);
                  stopped.stop = true;
                  drive(stopped, 100, 64);
              }).status,
              clean);
}

// The means can tell: each forbidden thing is caught.
TEST(AudioCallbackTest, TheWatchCatchesWhatIsForbidden) {
    EXPECT_TRUE(watched([] { ::getpid(); }).system_call);
    EXPECT_TRUE(watched([] { std::fputs("x", stderr); }).system_call);
    EXPECT_EQ(watched([] { ::operator delete(::operator new(64)); }).status, allocated);
    std::mutex mutex;
    EXPECT_EQ(watched([&] { const std::lock_guard lock(mutex); }).status, locked);
}

TEST(AudioCallbackTest, TakesASmallShareOfItsPeriod) {
    auto exchange = exchange_at_192_khz(6.0);
    const auto begin = std::chrono::steady_clock::now();
    drive(exchange, 15000, 64);
    const double per_call_us =
        std::chrono::duration<double, std::micro>(std::chrono::steady_clock::now() - begin).count() / 15000.0;
    std::printf("a call at 64 frames takes %.3f us of 333 us\n", per_call_us);
    EXPECT_LT(per_call_us, 33.3);  // a tenth of the period, on however slow a machine
}

}  // namespace
}  // namespace coldpin::rig
#endif

namespace coldpin::rig {
namespace {

TEST(AudioExchangeTest, PlaysAndRecordsEverySampleOnceWhateverTheBlocks) {
    std::vector<float> play(10000);
    for (std::size_t n = 0; n < play.size(); ++n) play[n] = static_cast<float>(n + 1);
    AudioExchange exchange({play}, 1, 48000.0);
    std::vector<float> heard;
    std::size_t block = 1;
    bool done = false;
    while (!done) {
        block = block * 7 % 509 + 1;
        std::vector<float> in(block), out(block, 99.0F);
        for (std::size_t n = 0; n < block; ++n) in[n] = -static_cast<float>(heard.size() + n + 1);
        const float* in_pointer = in.data();
        float* out_pointer = out.data();
        done = exchange_block(exchange, &in_pointer, &out_pointer, block, 0);
        heard.insert(heard.end(), out.begin(), out.end());
    }
    for (std::size_t n = 0; n < heard.size(); ++n) ASSERT_EQ(heard[n], n < play.size() ? play[n] : 0.0F);
    for (std::size_t n = 0; n < play.size(); ++n) ASSERT_EQ(exchange.record[0][n], -play[n]);
    EXPECT_TRUE(exchange.finished);
}

TEST(AudioExchangeTest, AStopFadesToSilenceWithinMilliseconds) {
    AudioExchange exchange({std::vector<float>(48000, 1.0F)}, 1, 48000.0);
    std::vector<float> in(64, 0.0F), out(64);
    const float* in_pointer = in.data();
    float* out_pointer = out.data();
    exchange_block(exchange, &in_pointer, &out_pointer, 64, 0);
    exchange.stop = true;
    std::vector<float> tail;
    for (int b = 0; b < 20; ++b) {
        const bool done = exchange_block(exchange, &in_pointer, &out_pointer, 64, 0);
        tail.insert(tail.end(), out.begin(), out.end());
        if (done) break;
    }
    EXPECT_LE(tail.size(), 384U);  // 5 ms and a block
    EXPECT_EQ(tail.back(), 0.0F);
    for (std::size_t n = 1; n < tail.size(); ++n) EXPECT_LE(tail[n], tail[n - 1]);
}

TEST(AudioExchangeTest, FlagsAreKeptWithTheirFramesAndCountedBeyond) {
    AudioExchange exchange({std::vector<float>(6400, 0.0F)}, 1, 48000.0);
    std::vector<float> in(64), out(64);
    const float* in_pointer = in.data();
    float* out_pointer = out.data();
    for (int b = 0; b < 100; ++b) exchange_block(exchange, &in_pointer, &out_pointer, 64, 2);
    EXPECT_EQ(exchange.flag_count, 100U);
    EXPECT_EQ(exchange.flags[3].frame, 192U);
    EXPECT_EQ(exchange.flags[3].bits, 2U);
}

}  // namespace
}  // namespace coldpin::rig
