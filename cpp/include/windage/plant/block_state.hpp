// The state of a block of trials as odeint sees it: n signals in one run of doubles, combined pack by pack.
#pragma once

#include <cstddef>
#include <new>
#include <vector>

#include <boost/numeric/odeint/util/is_resizeable.hpp>
#include <boost/numeric/odeint/util/resize.hpp>
#include <boost/numeric/odeint/util/same_size.hpp>

#include <windage/lanes/signal.hpp>

namespace windage {

template <class T> struct cache_line_allocator {
    using value_type = T;
    static constexpr std::align_val_t alignment{128};
    cache_line_allocator() = default;
    template <class U> cache_line_allocator(const cache_line_allocator<U>&) {}
    T* allocate(std::size_t n) { return static_cast<T*>(::operator new(n * sizeof(T), alignment)); }
    void deallocate(T* p, std::size_t) { ::operator delete(p, alignment); }
    template <class U> bool operator==(const cache_line_allocator<U>&) const { return true; }
};

class block_state {
public:
    block_state() = default;
    block_state(std::size_t signals, std::size_t block_size)
        : block_size_(block_size), values_(signals * block_size, 0.0) {}

    signal operator[](std::size_t i) { return values_.data() + i * block_size_; }
    constant_signal operator[](std::size_t i) const { return values_.data() + i * block_size_; }
    std::size_t signals() const { return block_size_ ? values_.size() / block_size_ : 0; }
    std::size_t block_size() const { return block_size_; }
    std::size_t size() const { return values_.size(); }
    double* data() { return values_.data(); }
    const double* data() const { return values_.data(); }

private:
    std::size_t block_size_ = 0;
    std::vector<double, cache_line_allocator<double>> values_;
};

/// odeint's algebra on block states: the operation is applied to one pack of every operand at a time.
struct block_algebra {
    template <class Op, class First, class... Rest> static WINDAGE_INLINE void apply(Op op, First& out, Rest&... in) {
        for (std::size_t i = 0; i < out.size(); i += lanes) {
            wide result = wide::load(out.data() + i);
            op(result, wide::load(in.data() + i)...);
            result.store(out.data() + i);
        }
    }
    template <class S1, class S2, class Op> static void for_each2(S1& s1, S2& s2, Op op) { apply(op, s1, s2); }
    template <class S1, class S2, class S3, class Op> static void for_each3(S1& s1, S2& s2, S3& s3, Op op) {
        apply(op, s1, s2, s3);
    }
    template <class S1, class S2, class S3, class S4, class Op>
    static void for_each4(S1& s1, S2& s2, S3& s3, S4& s4, Op op) {
        apply(op, s1, s2, s3, s4);
    }
    template <class S1, class S2, class S3, class S4, class S5, class Op>
    static void for_each5(S1& s1, S2& s2, S3& s3, S4& s4, S5& s5, Op op) {
        apply(op, s1, s2, s3, s4, s5);
    }
    template <class S1, class S2, class S3, class S4, class S5, class S6, class Op>
    static void for_each6(S1& s1, S2& s2, S3& s3, S4& s4, S5& s5, S6& s6, Op op) {
        apply(op, s1, s2, s3, s4, s5, s6);
    }
    template <class S1, class S2, class S3, class S4, class S5, class S6, class S7, class Op>
    static void for_each7(S1& s1, S2& s2, S3& s3, S4& s4, S5& s5, S6& s6, S7& s7, Op op) {
        apply(op, s1, s2, s3, s4, s5, s6, s7);
    }
    template <class S1, class S2, class S3, class S4, class S5, class S6, class S7, class S8, class Op>
    static void for_each8(S1& s1, S2& s2, S3& s3, S4& s4, S5& s5, S6& s6, S7& s7, S8& s8, Op op) {
        apply(op, s1, s2, s3, s4, s5, s6, s7, s8);
    }
};

} // namespace windage

namespace boost::numeric::odeint {

template <> struct is_resizeable<windage::block_state> : boost::true_type {
    static constexpr bool value = true;
};
template <> struct same_size_impl<windage::block_state, windage::block_state> {
    static bool same_size(const windage::block_state& a, const windage::block_state& b) { return a.size() == b.size(); }
};
template <> struct resize_impl<windage::block_state, windage::block_state> {
    static void resize(windage::block_state& a, const windage::block_state& b) {
        a = windage::block_state(b.signals(), b.block_size());
    }
};

} // namespace boost::numeric::odeint
