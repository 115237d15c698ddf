//! The result of a search as one plain record, a stock list as another, and their renderers. Each renderer writes to a writer; none opens files.

mod compensated;
mod compensated_table;
mod csv;
mod detail;
mod drawn;
mod filter;
mod json;
mod layout;
mod mask;
mod need;
mod numbers;
mod record;
mod stock;
mod swap;
mod table;
mod tighten;
mod together;
mod vet;
mod vet_drift;
mod vet_levels;
mod vet_real;
mod vet_table;
mod vet_trim;
mod yields;

#[cfg(test)]
mod sample;

pub use compensated::{
    BuiltErrorRecord, BuiltRowRecord, BuiltSectionRecord, COMPENSATED_CSV_COLUMNS, CompensatedRecord,
    CompensationRecord, CorrectionRecord, write_compensated_csv, write_compensated_json,
};
pub use compensated_table::write_compensated_table;
pub use csv::{CSV_COLUMNS, write_csv};
pub use drawn::{BoardRecord, SupplyRecord, TakenRecord};
pub use filter::{
    ChoiceRecord, FilterRecord, LevelRecord, NotchRecord, OpAmpRecord, PoleRecord, SECTIONS_FORMAT, SectionOfFilter,
    SectionsRecord, StopBandRecord, SwingRecord, write_sections_job, write_sections_json, write_sections_table,
};
pub use json::write_json;
pub use layout::{Align, Column, grid, paragraph, printable, unbroken};
pub use mask::{FiguresOfMask, MaskRecord, PieceOfMask};
pub use need::{NEED_FORMAT, NeedLine, NeedRecord, Quantity, write_need_json, write_need_table};
pub use numbers::{error_in_words, percent};
pub use record::{
    Achieved, ChosenRecord, FORMAT, FrontPoint, MeasureRecord, PartRecord, PieceRecord, Record, RowRecord,
    SearchRecord, SectionRecord, SectionSearch, ShelfRecord, TargetRecord, WantedRecord,
};
pub use stock::{
    AmountOfStock, DielectricOfStock, KindOfStock, LineOfStock, PriceRecord, STOCK_FORMAT, StockRecord, StockRemark,
    TemperatureCoefficientRecord, ToleranceRecord, write_stock_json, write_stock_table,
};
pub use swap::{
    ChangeRecord, ImpossibleRecord, ReplacementRecord, SWAP_FORMAT, SwapRecord, write_swap_json, write_swap_table,
};
pub use table::write_table;
pub use tighten::{
    StepCosts, StepRecord, TIGHTEN_FORMAT, TightenQuestion, TightenRecord, write_tighten_json, write_tighten_table,
};
pub use together::{BestRecord, BoundRecord, TogetherSearch};
pub use vet::{
    LimitRecord, MaskOutcome, OffPart, SpreadRecord, TolerancesRecord, VET_FORMAT, VetPart, VetPiece, VetRecord,
    VetSection, WorstRecord, YieldRecord, write_vet_json,
};
pub use vet_drift::{DriftRecord, FigureDriftRecord, KindDriftRecord, PartDriftRecord};
pub use vet_levels::{LevelsRecord, PeakRecord};
pub use vet_real::{RealEndRecord, RealRecord, RealSectionRecord, SlewRecord};
pub use vet_table::write_vet_table;
pub use vet_trim::{SelectRecord, TrimRecord};
pub use yields::{BuiltRecord, YieldsRecord};
