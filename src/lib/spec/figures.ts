export {
	agreementWords,
	contributionWords,
	plusMinus,
	refusedSentence,
	type AgreementWords,
	type PlusMinus
} from './words.ts';
