//! The compound file around an old binary workbook (MS-CFB): just enough to get at one stream.

/// Ends a chain of sectors; anything from [`RESERVED`] on is none.
const RESERVED: u32 = 0xFFFF_FFFA;
/// Streams below this lie in the mini stream (MS-CFB 2.2, mini stream cutoff size).
const MINI_BELOW: u64 = 4096;
/// Length of a directory entry, and of a mini sector.
const ENTRY: usize = 128;
const MINI_SECTOR: usize = 64;

/// A compound file with its tables of sectors.
pub(super) struct Compound<'a> {
    bytes: &'a [u8],
    sector: usize,
    next: Vec<u32>,
    next_mini: Vec<u32>,
    directory: Vec<u8>,
}

fn long(bytes: &[u8], at: usize) -> Option<u32> {
    let four = bytes.get(at..at + 4)?;
    Some(u32::from_le_bytes(four.try_into().ok()?))
}

fn longs(bytes: &[u8]) -> impl Iterator<Item = u32> {
    bytes
        .chunks_exact(4)
        .filter_map(|four| Some(u32::from_le_bytes(four.try_into().ok()?)))
}

impl<'a> Compound<'a> {
    /// Reads the tables; `None` where the bytes are no compound file.
    pub fn new(bytes: &'a [u8]) -> Option<Self> {
        let sector = match bytes.get(30..32)? {
            [9, 0] => 512,
            [12, 0] => 4096,
            _ => return None,
        };
        let mut file = Compound {
            bytes,
            sector,
            next: Vec::new(),
            next_mini: Vec::new(),
            directory: Vec::new(),
        };
        // The first 109 sectors of the table stand in the header, the others in a chain of their own.
        let mut of_table: Vec<u32> = longs(bytes.get(76..512)?).collect();
        let mut further = long(bytes, 68)?;
        let most = bytes.len() / sector + 1;
        for _ in 0..most {
            let Some(more) = file.at(further) else { break };
            let mut more: Vec<u32> = longs(more).collect();
            further = more.pop()?;
            of_table.extend(more);
        }
        for index in of_table
            .into_iter()
            .filter(|index| *index < RESERVED)
            .take(most)
        {
            if let Some(part) = file.at(index) {
                let part: Vec<u32> = longs(part).collect();
                file.next.extend(part);
            }
        }
        file.directory = file.chain(long(bytes, 48)?);
        file.next_mini = longs(&file.chain(long(bytes, 60)?)).collect();
        Some(file)
    }

    fn at(&self, index: u32) -> Option<&'a [u8]> {
        let from = (index as usize).checked_add(1)?.checked_mul(self.sector)?;
        // The last sector may be cut short.
        let end = from.checked_add(self.sector)?.min(self.bytes.len());
        self.bytes.get(from..end).filter(|_| index < RESERVED)
    }

    /// The bytes of a chain of sectors, as far as it is whole.
    fn chain(&self, first: u32) -> Vec<u8> {
        let mut found = Vec::new();
        let mut index = first;
        // A chain that comes back to itself never ends.
        for _ in 0..=self.next.len() {
            let Some(part) = self.at(index) else { break };
            found.extend_from_slice(part);
            let Some(next) = self.next.get(index as usize) else {
                break;
            };
            index = *next;
        }
        found
    }

    /// Whether a chain of sectors comes back to itself before its stream is full: followed to its end, it
    /// would fill the memory.
    pub fn is_endless(&self) -> bool {
        let never_ends = |table: &[u32], first: u32, sector: usize, size: u64| {
            let most = size.div_ceil(sector as u64).min(table.len() as u64 + 1);
            let mut index = first;
            let mut steps = 0;
            while let Some(next) = table.get(index as usize).filter(|_| steps < most) {
                index = *next;
                steps += 1;
            }
            steps > table.len() as u64
        };
        let mut tables = [48, 60].into_iter().filter_map(|at| long(self.bytes, at));
        if tables.any(|first| never_ends(&self.next, first, self.sector, u64::MAX)) {
            return true;
        }
        self.directory
            .chunks_exact(ENTRY)
            .enumerate()
            .any(|(number, entry)| {
                let (Some(first), Some(size)) = (long(entry, 116), long(entry, 120)) else {
                    return false;
                };
                let size = u64::from(size);
                // The first entry is the mini stream itself.
                if number == 0 || size >= MINI_BELOW {
                    never_ends(&self.next, first, self.sector, size)
                } else {
                    never_ends(&self.next_mini, first, MINI_SECTOR, size)
                }
            })
    }

    /// The first stream of one of these names.
    pub fn stream(&self, names: &[&str]) -> Option<Vec<u8>> {
        let entries = || self.directory.chunks_exact(ENTRY);
        let entry = names
            .iter()
            .find_map(|name| entries().find(|entry| name_of(entry).eq_ignore_ascii_case(name)))?;
        let (first, size) = (long(entry, 116)?, u64::from(long(entry, 120)?));
        if size >= MINI_BELOW {
            return Some(self.chain(first));
        }
        let mini = self.chain(long(entries().next()?, 116)?);
        let mut found = Vec::new();
        let mut index = first;
        for _ in 0..=self.next_mini.len() {
            let from = (index as usize).checked_mul(MINI_SECTOR)?;
            let Some(part) = mini.get(from..(from + MINI_SECTOR).min(mini.len())) else {
                break;
            };
            found.extend_from_slice(part);
            let Some(next) = self.next_mini.get(index as usize) else {
                break;
            };
            index = *next;
        }
        Some(found)
    }
}

/// Name of a directory entry: UTF-16, its length in bytes with the closing zero.
fn name_of(entry: &[u8]) -> String {
    let length = usize::from(u16::from_le_bytes([entry[64], entry[65]])).min(64);
    let units: Vec<u16> = entry[..length.saturating_sub(2)]
        .chunks_exact(2)
        .map(|pair| u16::from_le_bytes([pair[0], pair[1]]))
        .collect();
    String::from_utf16_lossy(&units)
}
