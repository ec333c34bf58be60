//! The queue of both searches: [`BucketQueue`], blocks filed by the earliest
//! time pending in them.

/// Blocks in buckets of equal time width. A block may be filed more than once;
/// only the entry that matches its current key counts.
#[derive(Debug, Default)]
pub struct BucketQueue {
    per_bucket: f32,
    buckets: Vec<Vec<u32>>,
    keys: Vec<f32>,
    current: usize,
    used: usize,
}

impl BucketQueue {
    /// Empties the queue for slots `0..slots` and buckets `width_s` wide.
    pub fn reset(&mut self, slots: usize, width_s: f32) {
        self.per_bucket = 1.0 / width_s;
        self.keys.clear();
        self.keys.resize(slots, f32::INFINITY);
        for bucket in &mut self.buckets[..self.used] {
            bucket.clear();
        }
        self.current = 0;
        self.used = 0;
    }

    /// Adds one more slot without a key.
    pub fn add_slot(&mut self) {
        self.keys.push(f32::INFINITY);
    }

    fn bucket_of(&self, key: f32) -> usize {
        (key * self.per_bucket) as usize
    }

    /// Files `slot` under `key` (s) if that is earlier than its present key.
    pub fn lower(&mut self, slot: u32, key: f32) {
        let old = self.keys[slot as usize];
        if key >= old {
            return;
        }
        self.keys[slot as usize] = key;
        let bucket = self.bucket_of(key);
        if old.is_finite() && self.bucket_of(old) == bucket {
            return;
        }
        if bucket >= self.buckets.len() {
            self.buckets.resize_with(bucket + 64, Vec::new);
        }
        self.used = self.used.max(bucket + 1);
        self.buckets[bucket].push(slot);
        self.current = self.current.min(bucket);
    }

    /// No key is earlier than this (s).
    pub fn earliest_s(&self) -> f32 {
        self.current as f32 / self.per_bucket
    }

    /// Takes a slot of the earliest bucket and clears its key.
    pub fn pop(&mut self) -> Option<u32> {
        while self.current < self.used {
            while let Some(slot) = self.buckets[self.current].pop() {
                let key = self.keys[slot as usize];
                if key.is_finite() && self.bucket_of(key) == self.current {
                    self.keys[slot as usize] = f32::INFINITY;
                    return Some(slot);
                }
            }
            self.current += 1;
        }
        None
    }
}
